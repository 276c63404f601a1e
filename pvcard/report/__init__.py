"""Pages and plots for people: one self-contained page per recording, its plots beside it."""

from pvcard.report.folder import write_report

__all__ = ["write_report"]
