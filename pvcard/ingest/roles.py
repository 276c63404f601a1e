"""The roles a column can play, and the names that say so by themselves."""

from __future__ import annotations

import re
from typing import NamedTuple

from pvcard.ingest.recording import CYLINDER_PRESSURE, DISCHARGE_LINE, SUCTION_LINE

ANGLE = "crank angle"
TIME = "time"
PULSE = "once-per-turn pulse"
CYCLE = "cycle"
PRESSURE = "pressure"
LINE_KINDS = {"suction": SUCTION_LINE, "discharge": DISCHARGE_LINE}

_UNIT = re.compile(r"(.*?)\s*\[\s*([^\[\]]*?)\s*\]")
_PRESSURE_NAME = re.compile(r"(.+) (head|crank) end(?: (suction|discharge) line)?", re.IGNORECASE)
_PLAIN_NAMES = {
    "crank angle": ANGLE,
    "time": TIME,
    "once per turn": PULSE,
    "cycle": CYCLE,
}


class Role(NamedTuple):
    """What a column holds; cylinder, end and kind only for a pressure."""

    what: str
    cylinder: str = ""
    end: str = ""  # "head" or "crank"
    kind: str = ""  # as `Channel.kind`

    def __str__(self) -> str:
        """As an error names it."""
        if self.what != PRESSURE:
            return self.what
        line = "" if self.kind == CYLINDER_PRESSURE else " " + self.kind.replace("_", " ")
        return f"{self.cylinder} {self.end} end{line}"


def split_unit(name: str) -> tuple[str, str | None]:
    """Name and unit of a column title; None without brackets.

    Examples
    --------
    >>> split_unit("C1 head end [bar(a)]")
    ('C1 head end', 'bar(a)')
    """
    found = _UNIT.fullmatch(name.strip())
    return (found.group(1), found.group(2)) if found else (name.strip(), None)


def plain(text: str) -> str:
    """Text with single blanks for runs of blanks and underscores, in lower case."""
    return " ".join(text.replace("_", " ").split()).casefold()


def role_of_name(name: str) -> tuple[Role, str | None] | None:
    """Role and unit of a self-describing name; None for any other name.

    Examples
    --------
    >>> role_of_name("C1 crank end suction line [kPa(g)]")
    (Role(what='pressure', cylinder='C1', end='crank', kind='suction_line'), 'kPa(g)')
    """
    title, unit = split_unit(name)
    what = _PLAIN_NAMES.get(plain(title))
    if what is not None:
        return Role(what), unit
    found = _PRESSURE_NAME.fullmatch(" ".join(title.replace("_", " ").split()))
    if found is None:
        return None
    cylinder, end, side = found.groups()
    kind = LINE_KINDS[side.lower()] if side else CYLINDER_PRESSURE
    return Role(PRESSURE, cylinder, end.lower(), kind), unit
