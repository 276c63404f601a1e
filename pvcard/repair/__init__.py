"""What an export needs before it is measured: whole turns first, then its errors found and told."""

from pvcard.repair.cycles import Turns, turns

__all__ = ["Turns", "turns"]
