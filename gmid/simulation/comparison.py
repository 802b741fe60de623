"""Prediction and simulation of an amplifier side by side."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.prediction import Prediction
from gmid.errors import UsageFault
from gmid.simulation.plans import SimulatedPlan

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Comparison:
    """One figure, as predicted and as simulated.

    Parameters
    ----------
    name : str
        Name of the figure; nodes and noise frequencies follow after a space.
    predicted, simulated : float
        In SI, dB or degrees.
    unit : str
        Its unit.

    Examples
    --------
    >>> round(Comparison("gbw", 20.1e6, 20e6, "Hz").relative, 6)
    0.005
    """

    name: str
    predicted: float
    simulated: float
    unit: str

    @property
    def difference(self) -> float:
        """Predicted less simulated."""
        return self.predicted - self.simulated

    @property
    def relative(self) -> float:
        """Difference over the simulated value [-]."""
        return self.difference / self.simulated if self.simulated else np.inf


def compare_plan(predicted: Prediction, simulated: SimulatedPlan) -> list[Comparison]:
    """Put all figures that were simulated beside those predicted.

    Parameters
    ----------
    predicted : Prediction
        Of one plan at one supply.
    simulated : SimulatedPlan
        The same, by the simulator.

    Returns
    -------
    list of Comparison
        Figures first, nodes last.

    Raises
    ------
    UsageFault
        If the prediction is a batch.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    >>> compare_plan(found, SimulatedPlan(node_voltages={"tail": 0.4}))[0].name
    'node tail'
    """
    if predicted.batch:
        raise UsageFault(
            f"a prediction of {predicted.batch} items is compared with one simulation.",
            hint="Predict one plan at one supply.",
        )
    return [*_figures(predicted, simulated), *_noise(predicted, simulated),
            *_nodes(predicted, simulated)]  # fmt: skip


def _figures(p: Prediction, s: SimulatedPlan) -> Iterator[Comparison]:
    cm_gain, cm_gbw, cm_margin = s.common_mode
    rows: tuple[tuple[str, Callable[[], Array], float, str], ...] = (
        ("dc_gain_db", lambda: p.signal.dc_gain_db, s.dc_gain_db, "dB"),
        ("gbw", lambda: p.signal.gbw, s.gbw, "Hz"),
        ("phase_margin", lambda: p.signal.phase_margin, s.phase_margin, "deg"),
        ("supply_current", lambda: p.supply_current, s.supply_current, "A"),
        ("common_mode.dc_gain_db", lambda: p.common_mode.dc_gain_db, cm_gain, "dB"),
        ("common_mode.gbw", lambda: p.common_mode.gbw, cm_gbw, "Hz"),
        ("common_mode.phase_margin", lambda: p.common_mode.phase_margin, cm_margin, "deg"),
        ("output_swing", lambda: p.output_swing().by_gain, s.output_swing, "V"),
        ("slew_rate", lambda: p.slew_rate, s.slew_rate, "V/s"),
        ("settling_time", lambda: p.settling_time, s.settling_time, "s"),
    )
    for name, read, value, unit in rows:
        if not np.isnan(value):
            yield Comparison(name, float(read()), value, unit)


def _noise(p: Prediction, s: SimulatedPlan) -> Iterator[Comparison]:
    if not s.noise_frequency.size:
        return
    density: Array = p.noise(s.noise_frequency).input_density
    for frequency, ours, theirs in zip(s.noise_frequency, density, s.input_noise, strict=True):
        yield Comparison(f"input_noise {frequency:.4g}", float(ours), float(theirs), "V/rtHz")


def _nodes(p: Prediction, s: SimulatedPlan) -> Iterator[Comparison]:
    for node, voltage in p.node_voltages.items():
        if node in s.node_voltages:
            yield Comparison(f"node {node}", float(voltage), s.node_voltages[node], "V")
