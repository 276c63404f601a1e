"""Progress on standard error, for work that takes longer than a second and a person who watches."""

from __future__ import annotations

import sys
import time
from types import TracebackType

_PATIENCE, _SPACING, _WIDTH = 1.0, 0.1, 78  # s, s, columns


class Meter:
    """Shows what is being done and how far it is, on one line that vanishes at the end."""

    def __init__(self) -> None:
        """Start the clock; nothing is shown before a second has passed."""
        self._start = self._last = time.monotonic()
        self._shown = False
        self._watched = sys.stderr.isatty()

    def __call__(self, text: str, share: float) -> None:
        """Say how far the work is.

        Parameters
        ----------
        text : what is being done
        share : from 0 to 1
        """
        now = time.monotonic()
        if not self._watched or now - self._start < _PATIENCE or now - self._last < _SPACING:
            return
        self._last, self._shown = now, True
        sys.stderr.write(f"\r{f'{100 * share:3.0f} %  {text}'[:_WIDTH]:<{_WIDTH}}")
        sys.stderr.flush()

    def __enter__(self) -> Meter:
        """Return the meter itself."""
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        """Clear the line."""
        if self._shown:
            sys.stderr.write("\r" + " " * _WIDTH + "\r")
            sys.stderr.flush()
