"""One value of machine.toml: from what is typed to SI, or to an error that says what to write."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, date, datetime, time, tzinfo
from typing import Any

from pvcard.errors import InputError, MachineError
from pvcard.machine_checks import Path, nearest
from pvcard.machine_document import Document
from pvcard.machine_keys import LIKELY_UNITS, TABLES, Key
from pvcard.machine_settings import Cost
from pvcard.units import parse_pressure, parse_quantity, parse_unit, split_quantity

_COST = re.compile(
    r"\s*([+-]?[\d.,]+(?:[eE][+-]?\d+)?)\s*([^\W\d_]{1,5}|[$€£¥])\s*(?:/\s*(.+?))?\s*$"
)


@dataclass
class Reader:
    """What is needed to read a value: the document, the barometer, the time zone."""

    document: Document
    barometric_pressure: float = 101325.0  # Pa
    zone: tzinfo = UTC

    def table(self, path: Path, keys: dict[str, Key]) -> dict[str, Any]:
        """Values of one table, those given only; unknown and missing keys are errors."""
        raw = self.document.at(path)
        if not isinstance(raw, dict):
            raise self.document.error(
                path, "this must be a table", found=_shown(raw), advice=_table_advice(path)
            )
        for name in raw:
            if name not in keys:
                raise self._unknown(path, name, keys)
        for name, key in keys.items():
            if key.required and name not in raw:
                raise self.document.error(
                    (*path, name), "missing key", advice=f"Write for example {name} = {key.example}"
                )
        return {name: self.value((*path, name), keys[name], raw[name]) for name in raw}

    def value(self, path: Path, key: Key, raw: Any) -> Any:
        """One value in SI; tables come back as they are, to be read by their own keys."""
        read = _READERS.get(key.kind)
        value: Any
        try:
            value = read(self, key, raw) if read else self._quantity(key, raw)
        except InputError as problem:
            raise self.document.error(
                path,
                problem.problem,
                found=problem.found or _shown(raw),
                expected=problem.expected,
                advice=self._bare_advice(path, key, raw) or problem.advice,
            ) from None
        if key.between and not isinstance(raw, bool):
            self._plausible(path, key, raw, value)
        return value * 100 if path[-1] == "reversal_minimum_pct" else value

    def _quantity(self, key: Key, raw: Any) -> float:
        if key.kind != "pressure":
            return parse_quantity(raw, key.kind)
        barometric = None if key.reference_free else self.barometric_pressure
        pressure = parse_pressure(raw, barometric_pressure=barometric)
        if pressure.reference == "unknown" and not key.reference_free:
            raise InputError(
                "absolute or gauge?",
                found=repr(raw),
                advice=f'Write "{raw}(a)" for an absolute or "{raw}(g)" for a gauge pressure',
            )
        return pressure.pascal

    def _bare_advice(self, path: Path, key: Key, raw: Any) -> str | None:
        """What to write instead of a bare number."""
        if isinstance(raw, bool) or not isinstance(raw, (int, float)):
            return None
        if key.kind in _READERS:
            return f"Write for example {path[-1]} = {key.example}"
        units = LIKELY_UNITS.get(key.kind) or (key.example.strip('"').split(" ", 1)[-1],)
        if key.kind == "fraction" and 0 < raw < 1:
            share, cent = f'"{raw * 100:g} %"', f'"{raw:g} %"'
            return f"Write {path[-1]} = {share} if it is a share of 1, {cent} if it is per cent"
        texts = [f"{raw:g} {unit}" for unit in units]
        plausible = [text for text in texts if _within(text, key)] or texts
        return f'Write for example {path[-1]} = "{plausible[0]}"'

    def _plausible(self, path: Path, key: Key, raw: Any, value: float) -> None:
        if key.between is None or _inside(value, key):
            return
        low, high = key.between
        advice = None
        if isinstance(raw, str) and key.kind in LIKELY_UNITS:
            number, _ = split_quantity(raw, key.kind)
            texts = [f"{number:g} {unit}" for unit in LIKELY_UNITS[key.kind]]
            likely = [text for text in texts if _within(text, key)]
            advice = f'Did you mean "{likely[0]}"?' if likely else None
        raise self.document.error(
            path,
            "this value is not plausible",
            found=_shown(raw),
            expected=f"between {low} and {high}",
            advice=advice,
        )

    def _unknown(self, path: Path, name: str, keys: dict[str, Key]) -> MachineError:
        near = nearest(name, keys)
        homes = [table for table, others in TABLES.items() if name in others]
        advice = f'Did you mean "{near}"?' if near else None
        if homes:
            advice = (
                f"{name} belongs to {homes[0]}; in TOML a key belongs to the last table header "
                "above it"
            )
        return self.document.error(
            (*path, name), "unknown key", expected="one of " + ", ".join(keys), advice=advice
        )


# --- kinds that are not dimensions --------------------------------------------------------------


def _text(reader: Reader, key: Key, raw: Any) -> str:
    if not isinstance(raw, str) or not raw.strip():
        raise InputError("this must be a text in quotes", expected=f"for example {key.example}")
    if key.words and raw not in key.words:
        near = nearest(raw, key.words)
        raise InputError(
            "unknown word",
            found=repr(raw),
            expected="one of " + ", ".join(key.words),
            advice=f'Did you mean "{near}"?' if near else None,
        )
    return raw.strip()


def _texts(reader: Reader, key: Key, raw: Any) -> tuple[str, ...]:
    if not isinstance(raw, list) or not all(isinstance(word, str) for word in raw):
        raise InputError("this must be a list of texts", expected=f"for example {key.example}")
    return tuple(word.strip() for word in raw)


def _number(reader: Reader, key: Key, raw: Any) -> float:
    if isinstance(raw, bool) or not isinstance(raw, (int, float)) or not math.isfinite(raw):
        raise InputError(
            "this must be a plain number, without unit and without quotes",
            expected=f"for example {key.example}",
        )
    return float(raw)


def _ratio(reader: Reader, key: Key, raw: Any) -> float:
    return parse_quantity(raw, "fraction") if isinstance(raw, str) else _number(reader, key, raw)


def _integer(reader: Reader, key: Key, raw: Any) -> int:
    if isinstance(raw, bool) or not isinstance(raw, int):
        raise InputError(
            "this must be a whole number without quotes", expected=f"for example {key.example}"
        )
    return raw


def _flag(reader: Reader, key: Key, raw: Any) -> bool:
    if not isinstance(raw, bool):
        raise InputError("this must be true or false, without quotes")
    return raw


def _table(reader: Reader, key: Key, raw: Any) -> dict[str, Any]:
    if not isinstance(raw, dict):
        raise InputError("this must be a table", expected=f"for example {key.example}")
    return raw


def _date(reader: Reader, key: Key, raw: Any) -> datetime:
    """Moment in UTC; a date alone is its first moment, local to the machine."""
    if isinstance(raw, str):
        try:
            raw = datetime.fromisoformat(raw.strip())
        except ValueError:
            raise InputError(
                "this is not a date", expected="year-month-day, for example " + key.example
            ) from None
    if isinstance(raw, date) and not isinstance(raw, datetime):
        raw = datetime.combine(raw, time())
    if not isinstance(raw, datetime):
        raise InputError(
            "this is not a date", expected="year-month-day, for example " + key.example
        )
    moment = raw if raw.tzinfo else raw.replace(tzinfo=reader.zone)
    try:
        return moment.astimezone(UTC)
    except OverflowError:
        raise InputError("this date is out of range") from None


def _cost(reader: Reader, key: Key, raw: Any) -> Cost:
    """An amount per SI unit: "0.09 EUR/kWh" is 2.5e-8 EUR per J."""
    match = _COST.match(raw) if isinstance(raw, str) else None
    if match is None:
        raise InputError(
            "this is not an amount of money",
            found=_shown(raw),
            expected=f"for example {key.example}",
        )
    value = _amount(match.group(1), raw)
    per = match.group(3)
    if bool(per) != bool(key.words):
        problem = f"per what? This is an amount per {key.words[0]}" if key.words else "per what?"
        problem = problem if key.words else "this amount is not per anything"
        raise InputError(problem, found=repr(raw), expected=f"for example {key.example}")
    if not per:
        return Cost(value, match.group(2))
    count = re.match(r"\d+(?=\s*[A-Za-z])", per)
    size = parse_unit(per[count.end() :] if count else per, key.words[0]).size
    size *= float(count.group()) if count else 1.0
    return Cost(value / size, match.group(2), "J" if key.words[0] == "energy" else "m3")


def _amount(digits: str, raw: str) -> float:
    if not re.fullmatch(r"[+-]?(\d+(\.\d*)?|\.\d+|\d+,\d{1,2}|0,\d+)([eE][+-]?\d+)?", digits):
        raise InputError(
            "the number can be read in more than one way",
            found=repr(raw),
            expected="digits with a decimal point and no thousands separators",
        )
    value = float(digits.replace(",", "."))
    if value < 0 or not math.isfinite(value):
        raise InputError("an amount of money must not be negative", found=repr(raw))
    return value


_READERS: dict[str, Callable[[Reader, Key, Any], Any]] = {
    "text": _text,
    "texts": _texts,
    "number": _number,
    "ratio": _ratio,
    "integer": _integer,
    "flag": _flag,
    "table": _table,
    "date": _date,
    "cost": _cost,
}


def _inside(value: float, key: Key) -> bool:
    if key.between is None:
        return True
    low, high = (_bound(text, key.kind) for text in key.between)
    return low * (1 - 1e-12) - 1e-15 <= value <= high * (1 + 1e-12) + 1e-15


def _bound(text: str, kind: str) -> float:
    return float(text) if kind in ("number", "ratio", "integer") else parse_quantity(text, kind)


def _within(text: str, key: Key) -> bool:
    try:
        return _inside(parse_quantity(text, key.kind), key)
    except InputError:
        return False


def _shown(raw: Any) -> str:
    if isinstance(raw, dict):
        return "a table"
    if isinstance(raw, list) and raw and isinstance(raw[0], dict):
        return "several tables"
    return {True: "true", False: "false"}[raw] if isinstance(raw, bool) else repr(raw)[:80]


def _table_advice(path: Path) -> str:
    name = ".".join(str(step) for step in path if isinstance(step, str))
    return f"Write [{name}] on a line of its own, and its keys below"
