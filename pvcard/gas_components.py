"""Names of gas components and what a composition may look like."""

from __future__ import annotations

import difflib
from collections.abc import Mapping

import numpy as np

from pvcard.errors import GasError
from pvcard.gas_data import COMPONENTS, DRY_AIR, GERG_COMPONENTS, SPELLINGS, plain
from pvcard.types import Floats

# Sums between these limits are taken for rounding of the analysis and normalised.
LOWEST_SUM, HIGHEST_SUM = 0.98, 1.02
# Sums nearer to one than this are not worth a note.
_SILENT_SUM_ERROR = 1e-6


def canonical_component(name: str) -> str:
    """Return the one name under which a component is known here.

    Parameters
    ----------
    name : str
        Name or formula in any case, with or without blanks, hyphens and underscores.

    Returns
    -------
    name : str
        For example ``carbon_dioxide`` for ``CO2``; ``air`` stays ``air``.

    Notes
    -----
    Raises `GasError` for an unknown name, with the nearest known one.

    Examples
    --------
    >>> canonical_component("i-Butane"), canonical_component("H2S"), canonical_component("nC4")
    ('isobutane', 'hydrogen_sulfide', 'n_butane')
    """
    wanted = plain(name)
    if wanted == "air":
        return "air"
    if wanted in SPELLINGS:
        return SPELLINGS[wanted]
    known = [*SPELLINGS, "air"]
    near = difflib.get_close_matches(wanted, known, n=1, cutoff=0.6)
    if near:
        expected = f"a known component, perhaps {SPELLINGS.get(near[0], 'air')!r}"
    else:
        expected = "one of " + ", ".join([*GERG_COMPONENTS, "air"])
    raise GasError("unknown gas component", found=repr(name), expected=expected)


def _as_number(name: str, value: object) -> float:
    try:
        number = float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError):
        number = float("nan")
    if not np.isfinite(number) or isinstance(value, bool):
        raise GasError(
            "a gas fraction must be a number",
            place=name,
            found=repr(value),
            expected="a bare number such as 0.94 (or 94 if all are in percent)",
        )
    if number < 0:
        raise GasError(
            "a gas fraction is negative",
            place=name,
            found=f"{number:g}",
            expected="0 or more",
            advice="Check the sign in the gas analysis",
        )
    return number


def _collected(composition: Mapping[str, float]) -> dict[str, float]:
    """Return fractions under canonical names, `air` and doubles still as written."""
    fractions: dict[str, float] = {}
    for name, value in composition.items():
        number = _as_number(name, value)
        canonical = canonical_component(name)
        if canonical in fractions:
            raise GasError(
                "a gas component is given twice",
                place=name,
                found=f"{canonical!r} under two spellings",
                expected="each component once",
            )
        fractions[canonical] = number
    return fractions


def _scale(total: float) -> tuple[float, tuple[str, ...]]:
    """Return the divisor that brings a sum to one, and what is to be told about it."""
    for unit, name in ((1.0, ""), (100.0, " %")):
        share = total / unit
        if LOWEST_SUM - 1e-9 <= share <= HIGHEST_SUM + 1e-9:
            notes = []
            if unit != 1.0:
                notes.append(f"gas fractions add up to {total:.6g} and were read as percent")
            if abs(share - 1) > _SILENT_SUM_ERROR:
                notes.append(f"gas fractions add up to {total:.6g}{name} and were normalised")
            return total, tuple(notes)
    raise GasError(
        "gas fractions do not add up to 1",
        found=f"a sum of {total:.6g}",
        expected="1 (or 100 %); 98 to 102 % is normalised",
        advice="Check the gas analysis for a missing or doubled component",
    )


def _moles_from_masses(fractions: dict[str, float]) -> dict[str, float]:
    masses = {name: COMPONENTS[name].molar_mass for name in COMPONENTS}
    masses["air"] = sum(y * masses[name] for name, y in DRY_AIR.items()) / sum(DRY_AIR.values())
    moles = {name: value / masses[name] for name, value in fractions.items()}
    total = sum(moles.values())
    return {name: value / total for name, value in moles.items()}


def _without_air(fractions: dict[str, float]) -> dict[str, float]:
    expanded = {name: value for name, value in fractions.items() if name != "air"}
    total = sum(DRY_AIR.values())
    for name, share in DRY_AIR.items():
        if fractions.get("air"):
            expanded[name] = expanded.get(name, 0.0) + fractions["air"] * share / total
    return expanded


def normalise_composition(
    composition: Mapping[str, float], *, basis: str = "mole"
) -> tuple[dict[str, float], tuple[str, ...]]:
    """Mole fractions that add up to one, from a gas analysis as it was typed.

    Parameters
    ----------
    composition : mapping of str to float
        Fraction of each component, or percent if the sum says so; `air` is dry air.
    basis : str
        ``mole`` (or ``volume``) or ``mass``.

    Returns
    -------
    fractions : dict of str to float
        Mole fractions under canonical names, zeros left out, in the order given.
    notes : tuple of str
        What was changed.

    Notes
    -----
    Sums of 98 to 102 % are normalised and noted. Anything else raises `GasError`, as does a
    negative fraction, an unknown component or one given twice.

    Examples
    --------
    >>> normalise_composition({"CH4": 94.5, "N2": 5.0})[0]["methane"].__round__(5)
    0.94975
    """
    if basis not in ("mole", "volume", "mass"):
        raise GasError("unknown basis of a composition", found=repr(basis), expected="mole or mass")
    if not composition:
        raise GasError("the gas composition is empty", expected="at least one component")
    written = _collected(composition)
    divisor, notes = _scale(sum(written.values()))
    fractions = {name: value / divisor for name, value in written.items() if value > 0}
    if basis == "mass":
        fractions = _moles_from_masses(fractions)
    fractions = _without_air(fractions)
    total = sum(fractions.values())
    return {name: value / total for name, value in fractions.items()}, notes


def mean_molar_mass(fractions: Mapping[str, float]) -> float:
    """Molar mass of a mixture.

    Parameters
    ----------
    fractions : mapping of str to float
        Mole fractions under canonical names, adding up to one.

    Returns
    -------
    molar_mass : ()
        ``sum of y M``. [kg/mol]
    """
    return sum(value * COMPONENTS[name].molar_mass for name, value in fractions.items())


def pseudo_critical(fractions: Mapping[str, float]) -> Floats:
    """Pseudo-critical temperature and pressure of a mixture by Kay's rule.

    Parameters
    ----------
    fractions : mapping of str to float
        Mole fractions under canonical names, adding up to one.

    Returns
    -------
    point : (2,)
        ``sum of y Tc`` [K] and ``sum of y pc`` [Pa].
    """
    parts = [COMPONENTS[name] for name in fractions]
    weights = np.array(list(fractions.values()))
    points = np.array([[c.critical_temperature, c.critical_pressure] for c in parts])
    result: Floats = weights @ points
    return result
