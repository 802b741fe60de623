"""From a plan to its prediction, in one condition or in all of a bench together."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import numpy as np
from numpy.typing import ArrayLike

from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.amplifier.prediction import Prediction
from gmid.amplifier.symmetry import find_sides
from gmid.amplifier.topology import build_circuit
from gmid.circuit.bias import Bias, solve_bias
from gmid.condition import Condition
from gmid.device.circuit_device import CircuitDevice
from gmid.device.device import Device
from gmid.device.joint import JointDevice


def predict(
    plan: AmplifierPlan, devices: Mapping[str, CircuitDevice], supply: Supply, *,
    voltage: ArrayLike | None = None, reference_current: ArrayLike | None = None,
    start: Bias | None = None,
) -> Prediction:  # fmt: skip
    """Solve the bias point of a plan in one condition; all figures follow from it.

    Parameters
    ----------
    plan : AmplifierPlan
        Its numbers may have leading axes, which broadcast with the supplies.
    devices : mapping of str to Device or JointDevice
        At least those of the plan, all of one condition, or all of the same ones.
    supply : Supply
        What it is fed with.
    voltage : array_like, shape (...), optional
        Supplies [V]; low, nominal and high by default, as the last axis.
    reference_current : array_like, shape (...), optional
        The nominal one by default [A].
    start : Bias, optional
        A solution nearby, to start from.

    Returns
    -------
    Prediction
        Figures are computed when read.

    Raises
    ------
    NoSolution
        If there is no bias point; the message names condition and node.
    OutOfReach
        If a length or the solution lies outside the table.
    UnknownName
        If a device is missing.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> round(float(found.node_voltages["tail"]), 2)
    0.4
    """
    levels = supply.voltages if voltage is None else np.asarray(voltage, dtype=np.float64)
    current = supply.reference_current if reference_current is None else reference_current
    circuit = build_circuit(
        plan, voltage=levels, vcm=supply.common_mode.at(levels),
        input_level=supply.input_level.at(levels), reference_current=current,
    )  # fmt: skip
    bias = solve_bias(circuit, devices, start=start, mirror=find_sides(circuit)).require()
    return Prediction(plan, devices, supply, levels, np.asarray(current, dtype=np.float64), bias)


def join_devices(
    bench: Iterable[tuple[Condition, Mapping[str, Device]]],
) -> dict[str, CircuitDevice]:
    """Put the devices of all conditions side by side, on an axis before that of supplies.

    Parameters
    ----------
    bench : iterable of (Condition, mapping of str to Device)
        Every condition with its devices.

    Returns
    -------
    dict of str to JointDevice
        By name.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices
    >>> devices = example_devices()
    >>> join_devices([(devices["nmos"].condition, devices)])["nmos"].place.shape
    (1, 1)
    """
    cases = [devices for _, devices in bench]
    place = np.arange(len(cases))[:, None]
    return {name: JointDevice([one[name] for one in cases], place) for name in cases[0]}


def predict_everywhere(
    plan: AmplifierPlan, bench: Iterable[tuple[Condition, Mapping[str, Device]]], supply: Supply
) -> Prediction:
    """Predict a single candidate in every condition of a bench and at its three supplies.

    Parameters
    ----------
    plan : AmplifierPlan
        The candidate.
    bench : iterable of (Condition, mapping of str to Device)
        Every condition with its devices.
    supply : Supply
        What it is fed with.

    Returns
    -------
    Prediction
        With axes (conditions, supplies).

    Raises
    ------
    NoSolution
        If there is no bias point; the message names condition and node.
    OutOfReach
        If a length or the solution lies outside a table.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> devices = example_devices()
    >>> bench = [(devices["nmos"].condition, devices)]
    >>> predict_everywhere(example_plan(), bench, example_supply())
    Prediction(a1 in tt/27, supplies 1.62 to 1.98 V, batch (1, 3))
    """
    return predict(plan, join_devices(bench), supply)


def split_conditions(
    found: Prediction, bench: Iterable[tuple[Condition, Mapping[str, Device]]]
) -> tuple[Prediction, ...]:
    """Give a prediction in all conditions as one for each, which share what is measured.

    Parameters
    ----------
    found : Prediction
        As `predict_everywhere` makes it.
    bench : iterable of (Condition, mapping of str to Device)
        The same one.

    Returns
    -------
    tuple of Prediction
        In the order of the bench, with the axis of supplies.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> devices = example_devices()
    >>> bench = [(devices["nmos"].condition, devices)]
    >>> found = predict_everywhere(example_plan(), bench, example_supply())
    >>> (only,) = split_conditions(found, bench)
    >>> bool((only.signal.gbw == found.signal.gbw[0]).all())
    True
    """
    return tuple(
        Prediction(
            found.plan, devices, found.supply, found.voltage, found.reference_current, None,
            (found, k),
        )
        for k, (_, devices) in enumerate(bench)
    )  # fmt: skip


def predict_each(
    plan: AmplifierPlan, bench: Sequence[tuple[Condition, Mapping[str, Device]]], supply: Supply
) -> tuple[Prediction, ...]:
    """Predict a single candidate in every condition: solved together, given one by one.

    Parameters
    ----------
    plan : AmplifierPlan
        The candidate.
    bench : sequence of (Condition, mapping of str to Device)
        Every condition with its devices.
    supply : Supply
        What it is fed with.

    Returns
    -------
    tuple of Prediction
        In the order of the bench, with the axis of supplies.

    Raises
    ------
    NoSolution
        If there is no bias point; the message names condition and node.
    OutOfReach
        If a length or the solution lies outside a table.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> devices = example_devices()
    >>> predict_each(example_plan(), [(devices["nmos"].condition, devices)], example_supply())
    (Prediction(a1 in tt/27, supplies 1.62 to 1.98 V, batch (3,)),)
    """
    return split_conditions(predict_everywhere(plan, bench, supply), bench)
