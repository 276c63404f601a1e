"""Whether a GERG-2008 mixture is a gas: Michelsen's test of stability, and its pure-fluid case.

A gas of composition z is stable if no trial phase w has a lower tangent-plane distance [1]_. The
trials here are a liquid after Wilson's K-factors, its largest component alone, and liquid water;
each is followed by successive substitution. For a pure fluid the only trial is its own liquid root,
and the test compares the Gibbs energies of the two roots.

References
----------
.. [1] M. L. Michelsen, *Fluid Phase Equilibria* 9 (1982) 1-19.
.. [2] G. M. Wilson, A modified Redlich-Kwong equation of state, 65th AIChE meeting, 1968; from
   memory.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache

import numpy as np
import pyaga8
from scipy.special import xlogy

from pvcard.gas_data import COMPONENTS
from pvcard.gas_gibbs import MOLAR_GAS_CONSTANT
from pvcard.types import Floats

# Step of the mole numbers for the chemical potentials.
_MOLE_STEP = 1e-5
# Where the search for a liquid's density starts, over the critical density.
_DENSE_START = 3.4
_DENSITY_STEPS = 40
_LARGEST_STEP = 3.0  # of ln W in one substitution
_SUBSTITUTIONS = 80
# A tangent-plane distance below this, over R T, proves instability.
_UNSTABLE = -1e-7
# Liquid of a component or mixture that Wilson's factors expect, below which none can form: at the
# dew point the sum is near one, and they expect too much rather than too little at high pressure.
_FAR_FROM_DEW = 0.1
# Trial and gas count as one phase when they differ by less than this.
_SAME_PHASE = 1e-3


class _Mixture:
    """GERG-2008 at one temperature and pressure for changing compositions of the same
    components."""

    def __init__(self, names: tuple[str, ...], pressure: float, temperature: float) -> None:
        self.names = names
        self.temperature = temperature
        self._kilopascal = pressure * 1e-3
        self._energy = MOLAR_GAS_CONSTANT * temperature
        self._volumes = np.array([COMPONENTS[name].critical_volume for name in names])
        self._composition = pyaga8.Composition()
        self._equation = pyaga8.Gerg2008()

    def _set(self, fractions: Floats) -> None:
        for name, share in zip(self.names, fractions.tolist(), strict=True):
            setattr(self._composition, name, share)
        self._equation.set_composition(self._composition)
        self._equation.calc_molar_mass()
        self._equation.temperature = self.temperature

    def gas_density(self, fractions: Floats) -> float | None:
        """Molar density [mol/L] of the gas root, None if the solver finds none."""
        self._set(fractions)
        self._equation.pressure = self._kilopascal
        self._equation.d = 0.0
        try:
            self._equation.calc_density(0)
        except RuntimeError:
            return None
        return float(self._equation.d)

    def liquid_density(self, fractions: Floats) -> float | None:
        """Molar density [mol/L] of the liquid root, None if there is none.

        Newton's rule from the dense side: pressure bends upward there, so each step stops short of
        the root.
        """
        self._set(fractions)
        critical = 1e-3 / float(fractions @ self._volumes)
        density = _DENSE_START * critical
        for _ in range(_DENSITY_STEPS):
            pressure, slope = self._pressure(density)
            if slope <= 0 or density < critical:
                return None
            step = (self._kilopascal - pressure) / slope
            density += min(step, 0.1 * density)
            if abs(step) < 1e-10 * density:
                return density
        return None

    def _pressure(self, density: float) -> tuple[float, float]:
        self._equation.d = density
        self._equation.calc_properties()
        return self._equation.z * density * self._energy, self._equation.dp_dd

    def _energy_of(self, moles: Floats, volume: float) -> float:
        """Helmholtz energy over R T of some moles in a volume [L], without the entropy of
        mixing."""
        total = float(moles.sum())
        fractions = moles / total
        self._set(fractions)
        equation = self._equation
        equation.d = total / volume
        equation.calc_properties()
        molar = equation.u - self.temperature * equation.s
        mixing = float(xlogy(fractions, fractions).sum())
        return total * (float(molar) / self._energy - mixing)

    def potentials(self, fractions: Floats, density: float) -> Floats:
        """Chemical potentials over R T, without ``ln x``, by differences of the Helmholtz
        energy."""
        volume = 1 / density
        middle = self._energy_of(fractions, volume)
        result = np.empty(len(fractions))
        for index in range(len(fractions)):
            step = np.zeros(len(fractions))
            step[index] = _MOLE_STEP
            once = self._energy_of(fractions + step, volume)
            if fractions[index] > 2 * _MOLE_STEP:
                back = self._energy_of(fractions - step, volume)
                result[index] = (once - back) / (2 * _MOLE_STEP)
            else:
                twice = self._energy_of(fractions + 2 * step, volume)
                result[index] = (4 * once - 3 * middle - twice) / (2 * _MOLE_STEP)
        return result


def _wilson_factors(names: tuple[str, ...], pressure: float, temperature: float) -> Floats:
    """K-factors of Wilson: ``pc / p exp(5.373 (1 + w) (1 - Tc / T))``; the constant from memory."""
    parts = [COMPONENTS[name] for name in names]
    result = [
        part.critical_pressure
        / pressure
        * np.exp(5.373 * (1 + part.acentric_factor) * (1 - part.critical_temperature / temperature))
        for part in parts
    ]
    return np.array(result)


def _trials(names: tuple[str, ...], gas: Floats, amounts: Floats) -> list[Floats]:
    """Return starting compositions of a liquid that might form, the likely one first."""
    if len(names) == 1:
        return [np.ones(1)]
    trials = [amounts / amounts.sum()]
    alone = {int(np.argmax(amounts))}
    if "water" in names and amounts[names.index("water")] > _FAR_FROM_DEW:
        alone.add(names.index("water"))
    for index in sorted(alone):
        trial = np.full(len(names), 1e-3 / len(names))
        trial[index] += 1 - 1e-3
        trials.append(trial)
    return trials


def _forms_liquid(mixture: _Mixture, gas: Floats, gas_density: float, trial: Floats) -> bool:
    """Whether successive substitution from a trial finds a phase below the tangent plane."""
    gas_potentials = np.log(gas) + mixture.potentials(gas, gas_density)
    logarithms = np.log(trial)
    distances: list[float] = []
    for _ in range(_SUBSTITUTIONS):
        amounts = np.exp(logarithms)
        fractions = amounts / amounts.sum()
        density = mixture.liquid_density(fractions) or mixture.gas_density(fractions)
        if density is None:
            return False
        excess = mixture.potentials(fractions, density) - gas_potentials
        distances.append(1 + float(amounts @ (logarithms + excess - 1)))
        if distances[-1] < _UNSTABLE:
            return True
        alike = np.abs(fractions - gas).max() < _SAME_PHASE
        if (alike and abs(density / gas_density - 1) < _SAME_PHASE) or _settles_above(distances):
            return False
        change = np.clip(-excess - logarithms, -_LARGEST_STEP, _LARGEST_STEP)
        logarithms = logarithms + change
        if np.abs(change).max() < 1e-6:
            return False
    return False


def _settles_above(distances: list[float]) -> bool:
    """Whether distances that fall in ever smaller steps will stay clear of zero."""
    if len(distances) < 5:
        return False
    before, last = distances[-3] - distances[-2], distances[-2] - distances[-1]
    if not 0 <= last < before:
        return False
    return last * last / (before - last) < 0.1 * distances[-1]


def _is_liquid(gas: Floats, names: tuple[str, ...], density: float, temperature: float) -> bool:
    """Whether a stable state is a liquid: colder and denser than the pseudo-critical point."""
    parts = [COMPONENTS[name] for name in names]
    critical_temperature = float(gas @ [part.critical_temperature for part in parts])
    critical_volume = float(gas @ [part.critical_volume for part in parts])
    return temperature < critical_temperature and density * 1e3 * critical_volume > 1


def gas_root_problem(
    fractions: Mapping[str, float], pressure: float, temperature: float
) -> str | None:
    """Say why a GERG-2008 mixture is not a gas.

    Parameters
    ----------
    fractions : mapping of str to float
        Mole fractions under canonical names.
    pressure, temperature : ()
        [Pa], [K]

    Returns
    -------
    problem : str or None
        ``two-phase`` (or a vapour that should have condensed), ``liquid``, or None for a gas.

    Notes
    -----
    A few milliseconds; fewer for a pure fluid. Warmer than every component's critical point a state
    is gas.
    """
    return _problem(tuple(fractions.items()), float(pressure), float(temperature))


@lru_cache(maxsize=4096)
def _problem(
    items: tuple[tuple[str, float], ...], pressure: float, temperature: float
) -> str | None:
    present = [(name, share) for name, share in items if share > 0]
    names = tuple(name for name, _ in present)
    if temperature > max(COMPONENTS[name].critical_temperature for name in names):
        return None
    gas = np.array([share for _, share in present])
    mixture = _Mixture(names, pressure, temperature)
    density = mixture.gas_density(gas)
    if density is None:
        return "not a gas that GERG-2008 can compute"
    amounts = gas / _wilson_factors(names, pressure, temperature)
    if len(names) > 1 and amounts.sum() < _FAR_FROM_DEW:
        return None
    if _is_liquid(gas, names, density, temperature):
        return "liquid"
    for trial in _trials(names, gas, amounts):
        if _forms_liquid(mixture, gas, density, trial):
            return "liquid" if len(names) == 1 else "two-phase"
    return None
