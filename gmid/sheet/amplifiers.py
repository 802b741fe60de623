"""Fills the amplifier's part of a sheet from its predictions."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from gmid.amplifier.ahead import measure_ahead
from gmid.amplifier.checks import KINDS, Check, judge, spell_condition
from gmid.amplifier.places import PLACES
from gmid.amplifier.plan import AmplifierPlan, Choices, Matching, Supply
from gmid.amplifier.predicting import predict_each
from gmid.amplifier.prediction import NOISE_FREQUENCIES, Prediction
from gmid.amplifier.signal import to_db
from gmid.amplifier.topology import NO_RESISTOR
from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import Capacitor, Resistor, Transistor
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.sheet.data import (
    AmplifierSheet,
    CheckRow,
    CommonModeRow,
    ConditionRow,
    Demand,
    NoisePoint,
    NoiseShares,
    Passive,
    Share,
    TransistorRow,
)
from gmid.sheet.limits import find_output_limit, find_sense_limit

Progress = Callable[[str, int, int], None]

_SHARE_FREQUENCIES = (1e3, 1e5, 1e7)
_POINT = ("id", "gm_over_id", "vgs", "vds", "vsb", "vdsat", "headroom")
_BENCH_PARTS = ("clp", "cln", "rlp", "rln")


@dataclass(frozen=True, eq=False)
class Reviewed:
    """An amplifier predicted in every condition, and judged.

    Parameters
    ----------
    plan : AmplifierPlan
        A single candidate.
    predictions : mapping of Condition to Prediction
        Each at low, nominal and high supply.
    checks : tuple of Check
        Everything it is judged by.
    choices : Choices
        Margins it has to keep.
    matching : mapping of str to Matching
        By device.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> devices = example_devices()
    >>> bench = [(devices["nmos"].condition, devices)]
    >>> review_plan(example_plan(), bench, example_supply()).first.plan.name
    'a1'
    """

    plan: AmplifierPlan
    predictions: Mapping[Condition, Prediction]
    checks: tuple[Check, ...]
    choices: Choices
    matching: Mapping[str, Matching]

    @property
    def first(self) -> Prediction:
        """The first condition."""
        return next(iter(self.predictions.values()))

    @property
    def is_met(self) -> bool:
        """Whether every check holds."""
        return all(check.met for check in self.checks)


def review_plan(
    plan: AmplifierPlan,
    bench: Iterable[tuple[Condition, Mapping[str, Device]]],
    supply: Supply,
    *,
    choices: Choices | None = None,
    matching: Mapping[str, Matching] | None = None,
    progress: Progress | None = None,
) -> Reviewed:
    """Predict a plan in every condition and judge it.

    Parameters
    ----------
    plan : AmplifierPlan
        A single candidate.
    bench : iterable of (Condition, mapping of str to Device)
        Every condition with its devices.
    supply : Supply
        What it is fed with.
    choices : Choices, optional
        Margins to keep.
    matching : mapping of str to Matching, optional
        By device.
    progress : callable, optional
        Told of each step.

    Returns
    -------
    Reviewed
        Predictions and checks.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> devices = example_devices()
    >>> bench = [(devices["nmos"].condition, devices)]
    >>> [c.name for c in review_plan(example_plan(), bench, example_supply()).checks][:1]
    ['saturation']
    """
    kept = choices or Choices()
    cases = list(bench)
    if progress:
        progress(f"{plan.name} in {len(cases)} conditions", 0, 1)
    found = predict_each(plan, cases, supply)
    predictions = {condition: one for (condition, _), one in zip(cases, found, strict=True)}
    measure_ahead(found, kept.saturation_margin)
    checks = judge(found, kept, matching=matching)
    if progress:
        progress(f"{plan.name} judged", 1, 1)
    return Reviewed(plan, predictions, checks, kept, matching or {})


def fill_amplifier(found: Reviewed) -> AmplifierSheet:
    """Turn a review into the rows of a sheet.

    Parameters
    ----------
    found : Reviewed
        The amplifier.

    Returns
    -------
    AmplifierSheet
        Pure data.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> devices = example_devices()
    >>> bench = [(devices["nmos"].condition, devices)]
    >>> sheet = fill_amplifier(review_plan(example_plan(), bench, example_supply()))
    >>> len(sheet.transistors), len(sheet.conditions)
    (23, 3)
    """
    plan, nominal = found.plan, _nominal(found.first)
    ranges = [one.input_range(found.choices.saturation_margin) for one in _all(found)]
    load = float(np.asarray(plan.load_resistance))
    offset = found.first.offset(found.matching) if found.matching else None
    rejection = found.first.rejection(found.matching) if found.matching else None
    return AmplifierSheet(
        name=plan.name,
        positions=plan.positions,
        multiple=int(plan.multiple),
        input_pair=plan.input_pair,
        output=plan.output,
        common_mode_sense=plan.common_mode_sense,
        load_capacitance=float(np.asarray(plan.load_capacitance)),
        load_resistance=load if load < NO_RESISTOR else None,
        demands={
            name: Demand(value=one.value, unit=KINDS[name].unit, because=one.because, at=one.at)
            for name, one in plan.demands.items()
        },
        transistors=tuple(_fill_transistors(found, nominal)),
        passives=tuple(_fill_passives(found.first.circuit)),
        conditions=tuple(row for one in _all(found) for row in _fill_conditions(found, one)),
        checks=tuple(fill_checks(found.checks)),
        noise_shares=tuple(_fill_shares(found.first, nominal)),
        gate_area=float(found.first.gate_area.ravel()[0]),
        input_range=(
            max(float(np.max(one.low)) for one in ranges),
            min(float(np.min(one.high)) for one in ranges),
        ),
        output_limit=find_output_limit(_all(found), found.choices.saturation_margin),
        sense_limit=find_sense_limit(_all(found)),
        offset_sigma=None if offset is None else float(np.max(offset.sigma)),
        supply_rejection_db=None
        if rejection is None
        else float(np.min(rejection.supply_rejection_db)),
        common_mode_rejection_db=None
        if rejection is None
        else float(np.min(rejection.common_mode_rejection_db)),
        offset_shares=() if offset is None else tuple(_fill_offset(offset.variance, nominal)),
    )


def fill_checks(checks: Sequence[Check]) -> list[CheckRow]:
    """Turn checks into rows.

    Parameters
    ----------
    checks : sequence of Check
        Of an amplifier or a filter.

    Returns
    -------
    list of CheckRow
        In the same order.

    Examples
    --------
    >>> fill_checks([Check("gbw", 2e7, 3e7, "Hz", "tt/27/1.8", 0.5, True)])[0].met
    True
    """
    return [
        CheckRow(
            name=one.name, required=one.required, achieved=one.achieved, unit=one.unit,
            condition=one.condition, margin=one.margin, met=one.met, because=one.because,
        )
        for one in checks
    ]  # fmt: skip


def _all(found: Reviewed) -> list[Prediction]:
    return list(found.predictions.values())


def _nominal(found: Prediction) -> int:
    """Which of the supplies is the nominal one."""
    return int(np.argmin(np.abs(found.voltage - found.supply.voltage)))


def _fill_transistors(found: Reviewed, nominal: int) -> list[TransistorRow]:
    rows = []
    first = found.first
    for one in first.circuit.transistors:
        point = {
            name: float(np.broadcast_to(value, first.batch)[nominal])
            for name, value in first.bias.point(one.name).items()
            if name in _POINT
        }
        worst, where = _worst_headroom(found, one)
        rows.append(TransistorRow(
            name=one.name, role=one.role or "", device=one.device,
            length=float(np.asarray(one.length)),
            unit_width=first.devices[one.device].unit.width,
            count=int(np.asarray(one.count)), stack=one.stack,
            bulk="source" if one.bulk == one.source and not _on_rail(one) else "rail",
            worst_headroom=worst, worst_condition=where, **point,
        ))  # fmt: skip
    return rows


def _on_rail(one: Transistor) -> bool:
    return one.source in ("0", "vss", "vdd")


def _worst_headroom(found: Reviewed, one: Transistor) -> tuple[float, str]:
    worst, where = np.inf, ""
    for case in _all(found):
        values = np.broadcast_to(case.headroom[one.name], case.batch)
        index = int(np.argmin(values))
        if values[index] < worst:
            worst = float(values[index])
            where = spell_condition(case.condition, float(case.voltage[index]))
    return worst, where


def _fill_passives(circuit: Circuit) -> list[Passive]:
    rows = []
    for one in circuit.elements:
        if one.name in _BENCH_PARTS:
            continue
        if isinstance(one, Resistor):
            rows.append(Passive(name=one.name, kind="resistor", value=float(one.resistance)))
        elif isinstance(one, Capacitor):
            rows.append(Passive(name=one.name, kind="capacitor", value=float(one.capacitance)))
    return rows


def _fill_conditions(found: Reviewed, case: Prediction) -> list[ConditionRow]:
    noise = case.noise(NOISE_FREQUENCIES).input_density
    swing = case.output_swing(found.choices.saturation_margin)
    signal, loop = case.signal, case.common_mode

    def pick(values: np.ndarray, index: int) -> float:
        return float(np.broadcast_to(values, case.batch)[index])

    return [
        ConditionRow(
            corner=case.condition.corner,
            temperature=case.condition.temperature,
            supply=round(float(case.voltage[index]), 9),
            dc_gain_db=pick(signal.dc_gain_db, index),
            gbw=pick(signal.gbw, index),
            phase_margin=pick(signal.phase_margin, index),
            gm_total=pick(signal.gm_total, index),
            excess_pole=pick(signal.excess_pole, index),
            input_noise=tuple(
                NoisePoint(frequency=f, density=float(noise[index, k]))
                for k, f in enumerate(NOISE_FREQUENCIES)
            ),
            supply_current=pick(case.supply_current, index),
            power=pick(case.power, index),
            slew_rate=pick(case.slew_rate, index),
            settling_time=pick(case.settling_time, index),
            output_swing=max(pick(swing.peak, index), 0.0),
            swing_by_gain=pick(swing.by_gain, index),
            swing_by_saturation=pick(swing.by_saturation, index),
            sense_range=_finite(pick(case.sensing.peak, index)),
            control_share=pick(case.balance, index),
            node_voltages={
                node: pick(values, index)
                for node, values in case.node_voltages.items()
                if node != "0"
            },
            common_mode=CommonModeRow(
                dc_gain_db=pick(loop.dc_gain_db, index),
                gbw=pick(loop.gbw, index),
                phase_margin=pick(loop.phase_margin, index),
                loop_margin=pick(case.loop_margin, index),
                input_to_output_gain_db=pick(loop.input_to_output_gain_db, index),
                supply_to_output_gain_db=pick(to_db(loop.supply_gain), index),
                settled_error=pick(loop.settled_error, index),
            ),
        )
        for index in range(case.batch[0])
    ]


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None


def _roles(case: Prediction) -> dict[str, str]:
    return {one.name: one.role or one.name for one in case.circuit.transistors}


def _fill_shares(case: Prediction, nominal: int) -> list[NoiseShares]:
    noise = case.noise(_SHARE_FREQUENCIES)
    roles = _roles(case)
    rows = []
    for index, frequency in enumerate(_SHARE_FREQUENCIES):
        power: dict[str, float] = {}
        for owner, values in noise.by_owner().items():
            role = roles.get(owner, "resistors")
            power[role] = power.get(role, 0.0) + float(values[nominal, index])
        rows.append(NoiseShares(frequency=frequency, shares=_ranked(power)))
    return rows


def _fill_offset(variance: Mapping[str, np.ndarray], nominal: int) -> tuple[Share, ...]:
    return _ranked({
        place: float(np.ravel(values)[min(nominal, np.size(values) - 1)])
        for place, values in variance.items()
    })  # fmt: skip


def _ranked(power: Mapping[str, float]) -> tuple[Share, ...]:
    total = sum(power.values()) or 1.0
    order = {name: index for index, name in enumerate(PLACES)}
    ranked = sorted(power, key=lambda role: (-power[role], order.get(role, len(order))))
    return tuple(Share(role=role, share=power[role] / total) for role in ranked)
