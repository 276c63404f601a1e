"""Gases that GERG-2008 does not have, through the optional CoolProp."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import Any

import numpy as np

from pvcard.errors import GasError
from pvcard.gas_components import mean_molar_mass
from pvcard.gas_data import COMPONENTS, GERG_COMPONENTS
from pvcard.gas_gibbs import Gibbs, gibbs_from_density_slopes
from pvcard.gas_models import Gas, gas_name
from pvcard.types import Floats

# In a mixture CoolProp's energies and pressure use slightly different gas constants; found by
# comparing the slope of g with Z and h for mixtures with ethylene and with sulfur hexafluoride.
_MIXTURE_INCONSISTENCY = 5e-5
# The pair CoolProp has no mixing parameters for, in its message, as registry numbers.
_UNMIXED_PAIR = re.compile(r"binary pair \[([\d-]+),([\d-]+)\]")


def _library(fractions: Mapping[str, float]) -> Any:
    """Import CoolProp, or say what needs it."""
    try:
        import CoolProp
    except ImportError as problem:
        foreign = ", ".join(name for name in fractions if name not in GERG_COMPONENTS)
        raise GasError(
            f"{foreign} is not a component of GERG-2008 and needs the optional CoolProp",
            found="CoolProp not installed",
            advice='Install it with: pip install "pvcard[coolprop]"',
        ) from problem
    return CoolProp


class CoolPropGas(Gas):
    """A fluid or mixture of CoolProp's multiparameter equations of state.

    Notes
    -----
    The gas phase is imposed, as near saturation the density solver fails otherwise. A pair of
    components without measured mixing parameters gets linear ones, and a note.
    """

    def __init__(self, fractions: Mapping[str, float], notes: tuple[str, ...] = ()) -> None:
        """Take mole fractions under canonical names, and what was assumed so far."""
        library = _library(fractions)
        super().__init__(gas_name(fractions), mean_molar_mass(fractions), fractions, notes)
        self._library = library
        self._state, more = _new_state(library, self.fractions)
        self._state.specify_phase(library.iphase_gas)
        self.notes = (*notes, *more)
        self._molar_gas_constant = float(self._state.gas_constant())
        self.molar_mass = float(self._state.molar_mass())
        if len(fractions) > 1:
            self.inconsistency = _MIXTURE_INCONSISTENCY
        self.gas_constant = self._molar_gas_constant / self.molar_mass

    def __reduce__(self) -> tuple[type, tuple[dict[str, float], tuple[str, ...]]]:
        """Pickle by composition; the equation of state is set up anew."""
        return CoolPropGas, (self.fractions, self.notes)

    def direct(self, pressure: Floats, temperature: Floats) -> Gibbs:
        """As in `Gas.direct`: CoolProp's HEOS, gas root of the density."""
        pairs = zip(pressure.tolist(), temperature.tolist(), strict=True)
        rows = [self._one(p, t) for p, t in pairs]
        found, density, g, h, cp, by_density, by_temperature = np.array(rows).reshape(-1, 7).T
        energy = self._molar_gas_constant * temperature
        z = found / (density * energy)
        reduced = g / energy - np.log(found) + (z - 1) * np.log(pressure / found)
        return gibbs_from_density_slopes(
            reduced,
            z,
            h / energy,
            cp / self._molar_gas_constant,
            by_density * density / found,
            by_temperature * temperature / found,
        )

    def _one(self, pressure: float, temperature: float) -> tuple[float, ...]:
        library, state = self._library, self._state
        try:
            state.update(library.PT_INPUTS, pressure, temperature)
            # The solver stops near the pressure asked for; take the one of the density it found.
            state.update(library.DmolarT_INPUTS, state.rhomolar(), temperature)
        except ValueError:
            return (np.nan,) * 7
        return (
            state.p(),
            state.rhomolar(),
            state.hmolar() - temperature * state.smolar(),
            state.hmolar(),
            state.cpmolar(),
            state.first_partial_deriv(library.iP, library.iDmolar, library.iT),
            state.first_partial_deriv(library.iP, library.iT, library.iDmolar),
        )

    def _isochore(self, density: Floats, temperature: Floats) -> tuple[Floats, Floats]:
        library, state, rows = self._library, self._state, []
        pairs = zip((density / self.molar_mass).tolist(), temperature.tolist(), strict=True)
        for molar, kelvin in pairs:
            state.update(library.DmolarT_INPUTS, molar, kelvin)
            slope = state.first_partial_deriv(library.iP, library.iT, library.iDmolar)
            rows.append((state.p(), slope))
        pressure, slope = np.array(rows).reshape(-1, 2).T
        return pressure, slope

    def phase_problem(self, pressure: float, temperature: float) -> str | None:
        """As in `Gas.phase_problem`, by CoolProp's own flash."""
        library = self._library
        state, _ = _new_state(library, self.fractions)
        try:
            state.update(library.PT_INPUTS, pressure, temperature)
        except ValueError:
            # CoolProp fails this way on a saturated state, and on some mixtures without a reason.
            return "saturated" if len(self.fractions) == 1 else None
        phase = state.phase()
        if phase == library.iphase_twophase:
            return "two-phase"
        return "liquid" if phase == library.iphase_liquid else None


def _new_state(library: Any, fractions: Mapping[str, float]) -> tuple[Any, tuple[str, ...]]:
    """Return a fresh state of a mixture, and notes on mixing parameters that had to be assumed."""
    names = {COMPONENTS[name].coolprop_name: name for name in fractions}
    notes: list[str] = []
    for _ in range(len(names) ** 2):
        try:
            state = library.AbstractState("HEOS", "&".join(names))
            state.set_mole_fractions(list(fractions.values()))
            return state, tuple(notes)
        except ValueError as problem:
            pair = _UNMIXED_PAIR.search(str(problem))
            if pair is None:
                raise GasError(
                    f"CoolProp cannot compute {gas_name(fractions)}",
                    found=str(problem),
                    advice="Give the gas by isentropic_exponent, compressibility and "
                    "molar_mass instead",
                ) from problem
            library.CoolProp.apply_simple_mixing_rule(*pair.groups(), "linear")
            codes = {library.CoolProp.get_fluid_param_string(n, "CAS"): n for n in names}
            first, second = (names[codes[code]] for code in pair.groups())
            notes.append(
                f"no measured mixing parameters for {first} with {second}: linear ones used"
            )
    raise AssertionError("each pair is set once")
