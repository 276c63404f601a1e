"""From recordings to rows: batches of cards, measured, explained and summed."""

from pvcard.analysis.front import analyse

__all__ = ["analyse"]
