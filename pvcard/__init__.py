"""pvcard: measured cylinder pressure of reciprocating compressors, turned into decisions.

Examples
--------
>>> import pvcard
>>> pvcard.__version__
'0.1.0'
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

__all__ = ["InputError", "analyse", "read_export", "read_machine", "write_report"]

_FRONT = {
    "InputError": "pvcard.errors",
    "analyse": "pvcard.analysis",
    "read_export": "pvcard.ingest",
    "read_machine": "pvcard.machine",
    "write_report": "pvcard.report",
}

if TYPE_CHECKING:
    from pvcard.analysis import analyse
    from pvcard.errors import InputError
    from pvcard.ingest import read_export
    from pvcard.machine import read_machine
    from pvcard.report import write_report


def __getattr__(name: str) -> Any:
    """Load a public name when it is first used, so that importing the package costs nothing."""
    if name not in _FRONT:
        raise AttributeError(f"module 'pvcard' has no attribute '{name}'")
    from importlib import import_module

    return getattr(import_module(_FRONT[name]), name)


def __dir__() -> list[str]:
    return sorted([*globals(), *__all__])
