"""Named inputs, who shares them, and the propagation of their uncertainty.

Every figure is carried as an `Estimate`: its value and its derivatives by the named inputs, exact
by the rules of calculus, the law of propagation of the GUM [1]_ applied only at the end. What two
figures have in common - the mark, the gas, the bore - stays in common, so that sums and
differences come out right.

References
----------
.. [1] JCGM 100:2008, *Guide to the expression of uncertainty in measurement*, clause 5.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from pvcard.types import Floats

CARD, CYLINDER, MACHINE = "card", "cylinder", "machine"


class Input(NamedTuple):
    """One input quantity and how far it is shared within a recording."""

    name: str
    shared_by: str  # "card": each end its own; "cylinder": both ends; "machine": every end
    text: str


_DECLARED = (
    Input("dead_centre", MACHINE, "dead centre mark"),
    Input("pressure_level", CARD, "zero of the transducer"),
    Input("pressure_gain", CARD, "gain of the transducer"),
    Input("suction_pressure", CYLINDER, "suction line pressure"),
    Input("discharge_pressure", CYLINDER, "discharge line pressure"),
    Input("suction_temperature", CYLINDER, "suction line temperature"),
    Input("discharge_temperature", CYLINDER, "discharge line temperature"),
    Input("bore", CYLINDER, "bore"),
    Input("stroke", CYLINDER, "stroke"),
    Input("connecting_rod_length", CYLINDER, "length of the connecting rod"),
    Input("clearance", CARD, "declared clearance"),
    Input("gas_exponent", MACHINE, "isentropic exponent of the gas"),
    Input("speed", MACHINE, "speed"),
    Input("turn_scatter", CARD, "scatter of the work between turns"),
)
_MODEL = (
    Input("heat_multiplier", MACHINE, "size of the wall heat"),
    Input("wall_temperature", MACHINE, "temperature of the wall"),
    Input("heat_shape", MACHINE, "course of the wall heat over the turn"),
    Input("warming", MACHINE, "warming of the gas while it is drawn in"),
    Input("clearance_gas", MACHINE, "temperature of the gas left in the clearance"),
)
FIT_NOISE = 8
_NOISE = tuple(
    Input(f"line_noise_{number + 1}", CARD, "trace over the closed parts and misfit of the model")
    for number in range(FIT_NOISE)
) + tuple(
    Input(name, CARD, text)
    for name, text in (
        ("noise_work", "noise and spacing of the samples"),
        ("noise_suction_loss", "noise and spacing of the samples"),
        ("noise_discharge_loss", "noise and spacing of the samples"),
        ("noise_peaks", "noise of single samples"),
        ("noise_suction_opening", "reading of the event"),
        ("noise_suction_closing", "reading of the event"),
        ("noise_discharge_opening", "reading of the event"),
        ("noise_discharge_closing", "reading of the event"),
        ("suction_line_choice", "polytrope or local exponent for the fitted lines"),
        ("discharge_line_choice", "polytrope or local exponent for the fitted lines"),
        ("suction_area_model", "moving plate taken as one flow area, and pulsation of the line"),
        ("discharge_area_model", "moving plate taken as one flow area, and pulsation of the line"),
    )
)
INPUTS: tuple[Input, ...] = _DECLARED + _MODEL + _NOISE
INDEX = {one.name: place for place, one in enumerate(INPUTS)}
# Inputs whose size stands in the derivative: their own uncertainty is one.
UNIT_INPUTS = tuple(one.name for one in _NOISE)


@dataclass(frozen=True, eq=False)
class Estimate:
    """A figure per card with its derivatives by the inputs.

    Arithmetic with estimates, arrays of shape (cards,) and numbers carries the derivatives along.
    """

    value: Floats  # (cards,)
    slopes: Floats  # (cards, inputs); (cards, 0) where no uncertainty is asked for

    __array_ufunc__ = None  # let arrays on the left hand over to the methods below

    def __add__(self, other: Estimate | Floats | float) -> Estimate:
        if isinstance(other, Estimate):
            return Estimate(self.value + other.value, self.slopes + other.slopes)
        return Estimate(self.value + other, self.slopes)

    __radd__ = __add__

    def __neg__(self) -> Estimate:
        return Estimate(-self.value, -self.slopes)

    def __sub__(self, other: Estimate | Floats | float) -> Estimate:
        if isinstance(other, Estimate):
            return Estimate(self.value - other.value, self.slopes - other.slopes)
        return Estimate(self.value - other, self.slopes)

    def __rsub__(self, other: Floats | float) -> Estimate:
        return Estimate(other - self.value, -self.slopes)

    def __mul__(self, other: Estimate | Floats | float) -> Estimate:
        if isinstance(other, Estimate):
            slopes = self.slopes * other.value[:, None] + other.slopes * self.value[:, None]
            return Estimate(self.value * other.value, slopes)
        return Estimate(self.value * other, self.slopes * _column(other))

    __rmul__ = __mul__

    def __truediv__(self, other: Estimate | Floats | float) -> Estimate:
        if isinstance(other, Estimate):
            value = self.value / other.value
            slopes = (self.slopes - other.slopes * value[:, None]) / other.value[:, None]
            return Estimate(value, slopes)
        return Estimate(self.value / other, self.slopes / _column(other))

    def __rtruediv__(self, other: Floats | float) -> Estimate:
        value = other / self.value
        return Estimate(value, -self.slopes * (value / self.value)[:, None])

    def log(self) -> Estimate:
        """Natural logarithm; NaN where the value is not positive."""
        safe = np.where(self.value > 0, self.value, np.nan)
        return Estimate(np.log(safe), self.slopes / safe[:, None])

    def exp(self) -> Estimate:
        """Exponential function."""
        value = np.exp(self.value)
        return Estimate(value, self.slopes * value[:, None])

    def power(self, exponent: Floats | float) -> Estimate:
        """Raise to a known power; NaN where the value is not positive."""
        safe = np.where(self.value > 0, self.value, np.nan)
        value = np.power(safe, exponent)
        return Estimate(value, self.slopes * _column(exponent * value / safe))

    def where(self, keep: np.ndarray[tuple[int, ...], np.dtype[np.bool_]]) -> Estimate:
        """NaN where `keep` is false."""
        return Estimate(np.where(keep, self.value, np.nan), self.slopes)

    def depending_on(self, name: str, slope: Floats | float) -> Estimate:
        """Return the same value, changing by `slope` more per unit of the input `name`."""
        if not self.slopes.shape[1]:
            return self
        slopes = self.slopes.copy()
        slopes[:, INDEX[name]] += slope
        return Estimate(self.value, slopes)

    def contributions(self, input_uncertainty: Floats) -> Floats:
        """Signed share of each input in the standard uncertainty.

        Parameters
        ----------
        input_uncertainty : (cards, inputs)
            Standard uncertainty of each input, its own unit.

        Returns
        -------
        shares : (cards, inputs)
            In the unit of the value.
        """
        return self.slopes * input_uncertainty

    def uncertainty(self, input_uncertainty: Floats) -> Floats:
        """Standard uncertainty of each card's figure.

        Parameters
        ----------
        input_uncertainty : (cards, inputs)
            Standard uncertainty of each input, its own unit; the inputs are independent.

        Returns
        -------
        u : (cards,)
            In the unit of the value.
        """
        shares = self.contributions(input_uncertainty)
        result: Floats = np.sqrt(np.einsum("ci,ci->c", shares, shares))
        return result


def _column(factor: Floats | float) -> Floats | float:
    return factor[:, None] if isinstance(factor, np.ndarray) and factor.ndim else factor


def constant(value: Floats, inputs: int) -> Estimate:
    """Return a figure that depends on no input.

    Parameters
    ----------
    value : (cards,)
        Any unit.
    inputs : number of inputs carried, 0 for none
    """
    return Estimate(value, np.zeros((len(value), inputs)))


def sum_uncertainty(shares: Floats, cylinders: list[str]) -> float:
    """Standard uncertainty of a sum over cards that share some of their inputs.

    Parameters
    ----------
    shares : (cards, inputs)
        Signed contributions of each input to each term, as from `Estimate.contributions`.
    cylinders : (cards,)
        Name of the cylinder of each card.

    Returns
    -------
    u : float
        In the unit of the terms.

    Notes
    -----
    An input shared by several cards adds up before it is squared; the others are squared first:
    equation 16 of JCGM 100 with correlations of one and zero.
    """
    names = sorted(set(cylinders))
    member = np.array([[own == name for own in cylinders] for name in names], dtype=float)
    by_cylinder = member @ shares
    total = 0.0
    for place, one in enumerate(INPUTS):
        if one.shared_by == MACHINE:
            total += float(shares[:, place].sum() ** 2)
        elif one.shared_by == CYLINDER:
            total += float((by_cylinder[:, place] ** 2).sum())
        else:
            total += float((shares[:, place] ** 2).sum())
    return float(np.sqrt(total))
