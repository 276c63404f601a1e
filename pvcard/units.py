"""The only place where units are read or converted; inside the house everything is SI.

The usual units stand in a static table (`unit_tables.py`), so that an ordinary run never pays for
loading pint; pint is asked only for a unit that is not in it. Pressures carry a reference besides
their unit: absolute, gauge, or unknown where the unit stands bare. How columns are shown in other
systems of units stands in `unit_display.py`.
"""

from __future__ import annotations

import difflib
import functools
import math
import re
import unicodedata
from typing import Any, Literal, NamedTuple

from pvcard.errors import InputError
from pvcard.unit_display import DisplayUnit, display_unit
from pvcard.unit_tables import DIMENSIONS, SLIPS, TEMPERATURE_ZEROS

__all__ = [
    "DisplayUnit",
    "Pressure",
    "PressureUnit",
    "Reference",
    "UnitScale",
    "display_unit",
    "parse_pressure",
    "parse_pressure_unit",
    "parse_quantity",
    "parse_unit",
    "split_quantity",
]

Reference = Literal["absolute", "gauge", "unknown"]

_NUMBER = re.compile(r"([+-]?(?:\d+(?:[.,]\d*)?|[.,]\d+)(?:[eE][+-]?\d+(?![\w]))?)")
_THOUSANDS = re.compile(r"[+-]?[1-9]\d{0,2},\d{3}")
# What pint may be asked: names with one-digit powers, multiplied or divided, no bare numbers.
_POWER_OF_UNIT = r"[A-Za-zµμ]+(?:(?:\*\*|\^)?-?\d)?"
_PRODUCT = re.compile(rf"{_POWER_OF_UNIT}(?:\s*[*/\s]\s*{_POWER_OF_UNIT})*")
_SUFFIXES: tuple[tuple[str, Reference], ...] = (
    ("(absolute)", "absolute"),
    ("(abs)", "absolute"),
    ("(a)", "absolute"),
    ("(gauge)", "gauge"),
    ("(gage)", "gauge"),
    ("(g)", "gauge"),
    ("absolute", "absolute"),
    ("abs", "absolute"),
    ("gauge", "gauge"),
    ("gage", "gauge"),
    ("a", "absolute"),
    ("g", "gauge"),
)


class PressureUnit(NamedTuple):
    """A unit of pressure and what it is counted from."""

    pascal_per_unit: float
    reference: Reference


class UnitScale(NamedTuple):
    """SI = zero + size * number."""

    size: float
    zero: float


class Pressure(NamedTuple):
    """A pressure reading; with an unknown reference the value is kept as if absolute."""

    pascal: float
    reference: Reference


# --- reading --------------------------------------------------------------------------------------


def parse_quantity(
    text: object,
    dimension: str,
    *,
    file: str | None = None,
    place: str | None = None,
    barometric_pressure: float | None = None,
    decimal: str | None = None,
    error: type[InputError] = InputError,
) -> float:
    """Value in SI of a text such as "280 mm".

    Parameters
    ----------
    text : number and unit, as typed; anything but a text is an error that says what to write
    dimension : a key of `unit_tables.DIMENSIONS`, for example "length"
    file, place : named in the error
    barometric_pressure : added to gauge pressures; without it they are an error [Pa]
    decimal : "." or "," where the file has one; without it a comma is a decimal comma unless it
        could be a thousands separator ("1,500"), which is an error
    error : class of the error raised

    Returns
    -------
    value : SI, except angle [deg], speed [rev/s] and fractions and points [-]. A pressure is
        absolute; one with a bare unit is taken as such (`parse_pressure` tells the two apart). [SI]

    Examples
    --------
    >>> parse_quantity("280 mm", "length")
    0.28
    >>> parse_quantity("2 points", "points")
    0.02
    """
    where = {"file": file, "place": place}
    try:
        if dimension == "pressure":
            return parse_pressure(
                text, barometric_pressure=barometric_pressure, decimal=decimal
            ).pascal
        number, unit = split_quantity(text, dimension, decimal=decimal)
        scale = parse_unit(unit, dimension)
    except InputError as problem:
        raise _placed(problem, error, text, where) from None
    value = number * scale.size + scale.zero
    if dimension == "temperature" and value < 0:
        raise error("below absolute zero", found=repr(text), **where)
    return value


def parse_pressure(
    text: object, *, barometric_pressure: float | None = None, decimal: str | None = None
) -> Pressure:
    """Absolute pressure and the reference its unit named.

    Parameters
    ----------
    text : number and unit, for example "9 bar(g)"
    barometric_pressure : needed for gauge units [Pa]
    decimal : as in `parse_quantity`

    Returns
    -------
    pressure : pascal is absolute; with reference "unknown" the value as if absolute. [Pa]

    Examples
    --------
    >>> parse_pressure("10 bar(a)")
    Pressure(pascal=1000000.0, reference='absolute')
    """
    number, spelling = split_quantity(text, "pressure", decimal=decimal)
    unit = parse_pressure_unit(spelling)
    pascal = number * unit.pascal_per_unit
    if unit.reference == "gauge":
        if barometric_pressure is None:
            raise InputError(
                "a gauge pressure needs the barometric pressure",
                found=repr(text),
                advice="Give the barometric pressure, or write it as absolute: bar(a), psia",
            )
        pascal += barometric_pressure
    if pascal < 0:
        advice = None
        if unit.reference != "gauge":
            advice = "Is it a gauge pressure? Then write (g) behind the unit"
        raise InputError("pressure below vacuum", found=repr(text), advice=advice)
    return Pressure(pascal, unit.reference)


def split_quantity(
    text: object, dimension: str, *, decimal: str | None = None
) -> tuple[float, str]:
    """Number and unit of a text, the unit as typed.

    Parameters
    ----------
    text : for example "9,84 in"
    dimension : for the messages
    decimal : as in `parse_quantity`

    Returns
    -------
    number, unit : the unit is never empty
    """
    kind = DIMENSIONS[dimension]
    if not isinstance(text, str):
        raise _no_unit(text, dimension)
    plain = unicodedata.normalize("NFKC", text).replace("\u2212", "-").strip()
    match = _NUMBER.match(plain)
    if not match:
        raise InputError(
            f"this is not {kind.article}",
            found=repr(text),
            expected=f'a number and a unit, for example "{kind.example}"',
        )
    digits, unit = match.group(1), plain[match.end() :].strip()
    doubtful = decimal is None and _THOUSANDS.fullmatch(digits)
    if doubtful or re.match(r"[.,]|\d(?!/)", unit) or (decimal == "." and "," in digits):
        raise InputError(
            "the number can be read in more than one way",
            found=repr(text),
            expected=f'digits without blanks or thousands separators, for example "{kind.example}"',
        )
    number = float(digits.replace(",", "."))
    if not math.isfinite(number):
        raise InputError("the number is too large", found=repr(text))
    if not unit:
        raise _no_unit(plain, dimension)
    return number, unit


def parse_unit(unit: str, dimension: str) -> UnitScale:
    """Size of a unit in SI: for whole columns, ``si = zero + size * column``.

    Parameters
    ----------
    unit : as typed, for example "deg" or "kg m2"
    dimension : a key of `unit_tables.DIMENSIONS`; for pressures the reference is dropped

    Returns
    -------
    scale : zero differs from 0 only for degC and degF. [SI]

    Examples
    --------
    >>> parse_unit("rad", "angle").size * 3.141592653589793
    180.0
    """
    if dimension.startswith("pressure"):
        found = parse_pressure_unit(unit)
        if dimension == "pressure_difference" and found.reference != "unknown":
            raise InputError(
                "a pressure difference has no reference",
                found=repr(unit),
                advice='Leave out the (a) or (g), for example "0.2 bar"',
            )
        return UnitScale(found.pascal_per_unit, 0.0)
    spelling = _spelling(unit)
    known = _look_up(spelling, dimension)
    if known is not None:
        size, name = known
        return UnitScale(size, TEMPERATURE_ZEROS[name] if dimension == "temperature" else 0.0)
    size_by_pint = _ask_pint(unit, dimension)
    if size_by_pint is None:
        raise _unknown_unit(unit, spelling, dimension)
    return UnitScale(size_by_pint, 0.0)


def parse_pressure_unit(unit: str) -> PressureUnit:
    """Size and reference of a unit of pressure.

    Parameters
    ----------
    unit : bare, or with (a), (g), abs, gauge behind it, with or without blanks: "psig", "kPa (a)",
        "kg/cm²g". "at" is the technical atmosphere of 98 066.5 Pa, "atm" the standard one.

    Returns
    -------
    pressure_unit : reference "unknown" for a bare unit

    Examples
    --------
    >>> parse_pressure_unit("barg")
    PressureUnit(pascal_per_unit=100000.0, reference='gauge')
    """
    spelling = _spelling(unit)
    known = _look_up(spelling, "pressure")
    if known is not None:
        return PressureUnit(known[0], "unknown")
    trimmed = re.sub(r"[\[{]\s*(\w+)\s*[\]}]$", r"(\1)", spelling)
    for suffix, reference in _SUFFIXES:
        if trimmed.casefold().endswith(suffix):
            known = _look_up(trimmed[: -len(suffix)].rstrip("_-"), "pressure")
            if known is not None:
                return PressureUnit(known[0], reference)
    difference = re.sub(r"(\(d\)|\(diff\)|d)$", "", spelling.casefold())
    if difference != spelling.casefold() and _look_up(difference, "pressure") is not None:
        raise InputError(
            "this is a unit of pressure difference, not of a pressure",
            found=repr(unit),
            expected="an absolute or gauge unit, for example bar(a) or psi(g)",
        )
    size = _ask_pint(unit, "pressure")
    if size is None:
        raise _unknown_unit(unit, spelling, "pressure")
    return PressureUnit(size, "unknown")


# --- looking a unit up ----------------------------------------------------------------------------


def _spelling(unit: str) -> str:
    """Unit without blanks, dots, multiplication signs and raised digits."""
    plain = unicodedata.normalize("NFKC", unit).replace("\u2212", "-").replace("μ", "µ")
    plain = plain.replace("**", "").replace("^", "")
    return re.sub(r"[\s.*·⋅×]", "", plain)


@functools.cache
def _folded(dimension: str) -> dict[str, str]:
    """Spelling in lower case -> spelling of the table, where that leaves no doubt."""
    units = DIMENSIONS[dimension].units
    names: dict[str, str] = {}
    for name, size in units.items():
        key = name.casefold()
        if key in names and units[names[key]] != size:
            names[key] = ""
        else:
            names.setdefault(key, name)
    return {key: name for key, name in names.items() if name}


def _look_up(spelling: str, dimension: str) -> tuple[float, str] | None:
    """Size and name of a unit of the table; capitals forgiven, save between milli and mega."""
    units = DIMENSIONS[dimension].units
    key = spelling.replace("μ", "µ")
    if key in units:
        return units[key], key
    name = _folded(dimension).get(key.casefold())
    if name is None:
        return None
    mixed = key != key.lower() and key != key.upper()
    if mixed and len(key) <= 5 and {key[0], name[0]} == {"m", "M"}:
        return None
    return units[name], name


def _ask_pint(unit: str, dimension: str) -> float | None:
    """SI size of a unit the table does not hold, None where pint cannot tell."""
    target = DIMENSIONS[dimension].pint_unit
    plain = unicodedata.normalize("NFKC", unit).replace("\u2212", "-").replace("·", "*").strip()
    if not target or len(plain) > 40 or not _PRODUCT.fullmatch(plain):
        return None
    expression = re.sub(r"(?<=[A-Za-z])(?:\*\*|\^)?(-?\d)", r"**\1", plain)
    registry = _pint_registry()
    try:
        size = float(registry.Quantity(1.0, expression).to(target).magnitude)
    except Exception:  # pint raises a dozen kinds here; each means: not such a unit
        return None
    return size if size > 0 and math.isfinite(size) else None


@functools.cache
def _pint_registry() -> Any:
    import pint

    return pint.UnitRegistry()


# --- messages -------------------------------------------------------------------------------------


def _placed(
    problem: InputError, error: type[InputError], text: object, where: dict[str, str | None]
) -> InputError:
    return error(
        problem.problem,
        found=problem.found or repr(text),
        expected=problem.expected,
        advice=problem.advice,
        **where,
    )


def _no_unit(value: object, dimension: str) -> InputError:
    kind = DIMENSIONS[dimension]
    if isinstance(value, bool) or not isinstance(value, (str, int, float)):
        return InputError(
            f"this is not {kind.article}",
            found=f"{str(value).lower()[:40]} ({_type_word(value)})",
            expected=f'a text with number and unit, for example "{kind.example}"',
        )
    unit = kind.example.split(" ", 1)[1]
    return InputError(
        "a bare number has no unit",
        found=str(value),
        expected=f"{kind.article} with its unit, in quotes",
        advice=f'Write for example "{value} {unit}" if it is in {unit}',
    )


def _type_word(value: object) -> str:
    words: dict[type, str] = {bool: "true or false", list: "a list", dict: "a table"}
    return words.get(type(value), f"a {type(value).__name__}")


def _unknown_unit(unit: str, spelling: str, dimension: str) -> InputError:
    kind = DIMENSIONS[dimension]
    advice = SLIPS.get((dimension, spelling))
    others = [d for d in DIMENSIONS if d != dimension and spelling in DIMENSIONS[d].units]
    problem = f"unknown unit for {kind.article}"
    if others:
        problem = f"this is the unit of {DIMENSIONS[others[0]].article}, not of {kind.article}"
        if dimension == "fraction" and advice is None:
            advice = "write it relative to the value itself, in per cent"
    near = difflib.get_close_matches(spelling, kind.units, n=8, cutoff=0.5)
    if advice is None and near and not others:
        closest = min(near, key=lambda n: (n[0] != spelling[0], abs(len(n) - len(spelling))))
        advice = f'did you mean "{closest}"?'
    sizes = {size: name for name, size in reversed(kind.units.items())}
    usual = ", ".join(list(sizes.values())[:-7:-1])
    return InputError(
        problem,
        found=repr(unit),
        expected=f'a unit such as {usual}, for example "{kind.example}"',
        advice=advice and advice[0].upper() + advice[1:],
    )
