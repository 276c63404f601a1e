"""The periodic cycle of a batch of cylinders.

One turn maps mass and energy of the gas at the head-end dead centre onto those a turn later. The
periodic cycle is the fixed point of this map; it is found by turning and Anderson's mixing, card by
card, in some five to eight turns.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from pvcard.cycle.description import CycleError, Cylinders, Spread, spread
from pvcard.cycle.fluid import Fluid, GasFace, Reach, fit_fluid
from pvcard.cycle.gas_step import StepFlows
from pvcard.cycle.result import Cycles, joined
from pvcard.cycle.setting import Side, prepare
from pvcard.cycle.turning import Turner
from pvcard.errors import GasError
from pvcard.gas import Gas, check_gas_phase
from pvcard.types import Booleans, Floats, Integers

DEFAULT_STEP = 0.25  # deg
_CHUNK = 400  # cards turned together: their arrays stay in the processor's cache
_WIDEST_RANGE = 12.0  # of pressures that one fit of the gas serves
_MOST_TURNS = 40
_MIXED_TURNS = 16
_LARGEST_CHANGE = 0.3  # of mass and energy by one mixing


class _Mixer:
    """Anderson's mixing with two past turns, each card by itself."""

    def __init__(self) -> None:
        self.starts: list[Floats] = []
        self.changes: list[Floats] = []

    def next(self, start: Floats, end: Floats) -> Floats:
        """Where to start the next turn, from the start and end of the last; (unknowns, cards)."""
        change = end - start
        self.starts = [*self.starts, start][-3:]
        self.changes = [*self.changes, change][-3:]
        count = len(self.starts) - 1
        if count == 0:
            return end
        steps = np.stack([new - old for old, new in zip(self.starts, self.starts[1:])])
        bends = np.stack([new - old for old, new in zip(self.changes, self.changes[1:])])
        normal = np.einsum("auc,buc->cab", bends, bends)
        trace = np.einsum("caa->c", normal) + 1e-300
        normal = normal + (1e-12 * trace)[:, None, None] * np.eye(count)
        right = np.einsum("auc,uc->ca", bends, change)
        share = np.linalg.solve(normal, right[..., None])[..., 0]
        mixed = end - np.einsum("ca,auc->uc", share, steps + bends)
        low, high = end - _LARGEST_CHANGE * np.abs(end), end + _LARGEST_CHANGE * np.abs(end)
        result: Floats = np.clip(np.where(np.isfinite(mixed), mixed, end), low, high)
        return result


def _settle(turner: Turner, tolerance: float) -> tuple[Integers, Booleans]:
    """Turn until start and end of the turn agree; the last turn stays in the turner."""
    scale = np.abs(turner.vector())
    mixer = _Mixer()
    cards = turner.shape[1]
    turns = np.zeros(cards, dtype=np.int64)
    done: Booleans = np.zeros(cards, dtype=bool)
    for turn in range(_MOST_TURNS):
        start = turner.vector() / scale
        turner.turn()
        end = turner.vector() / scale
        turns += ~done
        change = np.abs(end - start).max(axis=0)
        if not np.isfinite(change).all():
            card = int(np.flatnonzero(~np.isfinite(change))[0])
            raise CycleError(
                f"no cycle can be computed for card {card}: its state left the range of the gas",
                advice="Check flow areas, leak sizes, speed and heat multiplier for slips of unit",
            )
        done = change < tolerance
        if done.all():
            break
        # Settled cards just go on turning: mixing would only stir up rounding errors. So do those
        # that have not settled for long, whose plates bounce differently at each small change.
        mixed = mixer.next(start, end)
        plain = done | (turn >= _MIXED_TURNS)
        turner.set_vector(np.where(plain, end, mixed) * scale)
    return turns, done


def _balances(turner: Turner, start: Floats) -> tuple[Floats, Floats]:
    flows = StepFlows(*turner.sums.net)
    rows = turner.shape[0]
    gained_mass = (flows.suction + flows.discharge + flows.suction_leak + flows.discharge_leak).sum(
        axis=0
    ) + (flows.rings + flows.packing).sum(axis=0)
    gained_energy = (
        flows.suction_energy + flows.discharge_energy + flows.leak_energy + flows.heat + flows.work
    ).sum(axis=0)
    mass_scale = np.abs(flows.suction + flows.suction_leak).sum(axis=0) + 1e-3 * start[:rows].sum(0)
    energy_scale = np.abs(flows.work).sum(axis=0) + 1e-3 * np.abs(start[rows : 2 * rows]).sum(0)
    return gained_mass / mass_scale, gained_energy / energy_scale


def _cards_first(array: Floats) -> Floats:
    return np.ascontiguousarray(np.moveaxis(array, -1, 0).swapaxes(1, -1))


def _result(turner: Turner, turns: Integers, converged: Booleans, start: Floats) -> Cycles:
    setting, sums, trace = turner.setting, turner.sums, turner.trace
    flows = StepFlows(*sums.net)
    mass_imbalance, energy_imbalance = _balances(turner, start)
    suction, discharge = turner.plates
    if turner.fixed_line:
        out = flows.discharge_out.sum(axis=0)
        ideal = setting.discharge.gas.enthalpy
        some = out > 0
        enthalpy = np.where(
            some, flows.discharge_out_energy.sum(axis=0) / np.where(some, out, 1.0), ideal
        )
        temperature = setting.fluid.state_of_enthalpy(setting.discharge.pressure, enthalpy)[1]
    else:
        temperature = turner.line_temperature
    return Cycles(
        ends=setting.batch.described.ends,
        crank_angle=setting.angle[:-1].copy(),
        volume=_cards_first(setting.volume[:-1]),
        pressure=_cards_first(trace.pressure),
        temperature=_cards_first(trace.temperature),
        mass=_cards_first(trace.mass),
        suction_lift=_cards_first(_relative(trace.suction_lift, setting.suction)),
        discharge_lift=_cards_first(_relative(trace.discharge_lift, setting.discharge)),
        swept_volume=setting.swept.T.copy(),
        work=flows.work.T.copy(),
        heat=flows.heat.T.copy(),
        drawn=(flows.suction + flows.suction_leak).T.copy(),
        delivered=-(flows.discharge + flows.discharge_leak).T,
        suction_backflow=sums.suction_backflow.T.copy(),
        discharge_backflow=sums.discharge_backflow.T.copy(),
        suction_leak=sums.suction_leak.T.copy(),
        discharge_leak=sums.discharge_leak.T.copy(),
        ring_leak=sums.rings[0].copy(),
        packing_leak=sums.packing[-1].copy(),
        discharge_temperature=temperature,
        ideal_discharge_temperature=setting.ideal_discharge,
        wall_temperature=setting.wall_temperature,
        suction_seat_impact=suction.seat_impact.T.copy(),
        suction_guard_impact=suction.guard_impact.T.copy(),
        discharge_seat_impact=discharge.seat_impact.T.copy(),
        discharge_guard_impact=discharge.guard_impact.T.copy(),
        mass_imbalance=mass_imbalance,
        energy_imbalance=energy_imbalance,
        turns=turns,
        converged=converged,
    )


def _relative(lift: Floats, side: Side) -> Floats:
    result: Floats = lift / side.plates.lift
    return result


def _part(batch: Spread, cards: Integers) -> Spread:
    """Cards of a batch; waves, kept in the description, are cut as well."""

    def cut(group: dict[str, Floats]) -> dict[str, Floats]:
        return {name: values[..., cards] for name, values in group.items()}

    def cut_waves(amplitudes: Any) -> Any:
        if amplitudes is None or np.shape(amplitudes)[0] == 1:
            return amplitudes
        return np.asarray(amplitudes)[cards]

    described = batch.described
    described = replace(
        described,
        pulsation=replace(
            described.pulsation,
            suction=cut_waves(described.pulsation.suction),
            discharge=cut_waves(described.pulsation.discharge),
        ),
        speed_ripple=cut_waves(described.speed_ripple),
    )
    cylinder = cut(batch.cylinder)
    return Spread(
        described,
        len(cylinder["bore"]),
        batch.ends,
        cylinder,
        cut(batch.end),
        cut(batch.suction),
        cut(batch.discharge),
        {path: cut(leak) for path, leak in batch.leaks.items()},
        cut(batch.wall),
    )


def fluid_for(described: Cylinders, gas: GasFace) -> Fluid:
    """Fit the fluid that a batch needs.

    Parameters
    ----------
    described : Cylinders
    gas : a gas of `pvcard.gas`

    Returns
    -------
    Fluid
        To be handed to `steady_state` where several batches share it.

    Notes
    -----
    A suction state that is not a gas raises `GasError`.
    """
    return _fluid(spread(described), gas)


def _fluid(batch: Spread, gas: GasFace) -> Fluid:
    suction = batch.cylinder["suction_pressure"]
    temperature = batch.cylinder["suction_temperature"]
    reach = Reach(
        (float(suction.min()), float(suction.max())),
        float(batch.cylinder["discharge_pressure"].max()),
        (float(temperature.min()), float(temperature.max())),
    )
    if isinstance(gas, Gas):
        try:
            check_gas_phase(gas, reach.suction_pressure[1], reach.suction_temperature[0])
        except GasError:
            # The worst pressure and the worst temperature need not belong to one card.
            for one_pressure, one_temperature in zip(suction, temperature):
                check_gas_phase(gas, float(one_pressure), float(one_temperature))
    return fit_fluid(gas, reach)


def _chunks(batch: Spread, *, one_fluid: bool) -> list[Integers]:
    """Cards to be turned together: not too many, and not too far apart in pressure."""
    low, high = batch.cylinder["suction_pressure"], batch.cylinder["discharge_pressure"]
    order: Integers = np.arange(batch.cards) if one_fluid else np.argsort(low, kind="stable")
    chunks: list[list[int]] = []
    top = 0.0
    for card in order.tolist():
        new_top = max(top, high[card])
        if (
            not chunks
            or len(chunks[-1]) >= _CHUNK
            or (
                not one_fluid
                and new_top > max(_WIDEST_RANGE, high[card] / low[card]) * low[chunks[-1][0]]
            )
        ):
            chunks.append([])
            new_top = high[card]
        chunks[-1].append(card)
        top = new_top
    return [np.array(chunk) for chunk in chunks]


def steady_state(
    described: Cylinders,
    gas: GasFace | Fluid,
    *,
    step: float = DEFAULT_STEP,
    ideal_valves: bool = False,
    tolerance: float = 1e-7,
) -> Cycles:
    """Periodic cycle of every cylinder of a batch.

    Parameters
    ----------
    described : Cylinders
        (cards,) and (cards, ends) parameters.
    gas : a gas of `pvcard.gas`, or the result of `fluid_for`
        One gas for the whole batch.
    step : ()
        Crank angle of one step, a whole fraction of 360. [deg]
    ideal_valves : bool
        Valves that open and close at once at line pressure; the valve parameters are then not used.
    tolerance : ()
        Relative change of mass, energy and discharge enthalpy over the last turn. [-]

    Returns
    -------
    Cycles
        Cards that did not become periodic have ``converged`` false (their last turn is given).

    Notes
    -----
    Mass and internal energy of each end by Alexander's two-stage implicit method [1]_, order two;
    plates half a step apart from the gas, order two; the periodic state by Anderson mixing [2]_.
    The first law as in any textbook of the open system, gas entering with the enthalpy of the side
    it comes from.

    References
    ----------
    .. [1] R. Alexander, "Diagonally implicit Runge-Kutta methods for stiff O.D.E.'s", *SIAM J.
       Numer. Anal.* 14 (1977) 1006.
    .. [2] D. G. Anderson, "Iterative procedures for nonlinear integral equations", *J. ACM* 12
       (1965) 547.
    """
    steps = round(360 / step)
    if not (steps >= 180 and abs(steps * step - 360) < 1e-9):
        raise CycleError(
            "unusable step",
            place="step",
            found=f"{step:g} deg",
            expected="a whole fraction of 360 deg, at most 2 deg",
        )
    batch = spread(described)
    given = gas if isinstance(gas, Fluid) else None
    parts = []
    chunks = _chunks(batch, one_fluid=given is not None)
    for cards in chunks:
        chunk = _part(batch, cards)
        fluid = given or _fluid(chunk, gas)  # type: ignore[arg-type]
        turner = Turner(prepare(chunk, fluid, steps), ideal_valves=ideal_valves)
        start = turner.vector()
        turns, converged = _settle(turner, tolerance)
        parts.append(_result(turner, turns, converged, start))
    return joined(parts).take(np.argsort(np.concatenate(chunks)))
