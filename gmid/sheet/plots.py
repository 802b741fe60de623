"""Figures of an amplifier: its circuit, gain and phase, common-mode loop, bias points, noise."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from gmid.amplifier.crew import Crew
from gmid.amplifier.prediction import Prediction
from gmid.amplifier.signal import differential_gain, to_db
from gmid.amplifier.topology import PROBE
from gmid.device.spline import Array
from gmid.network import DoubleInjection, Network, Noise, break_loop
from gmid.quantity import format_quantity
from gmid.sheet.amplifiers import Reviewed
from gmid.sheet.bias_plot import draw_bias, find_nominal
from gmid.sheet.figures import Style, choose_style, drawing, new_figure, save_figure
from gmid.sheet.schematic import draw_schematic

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_WIDTH = 125.0
_MOST_SHARES = 4
_COLOURS = 8
_BENCH_REACH = 1.5

Measure = Callable[[Network], Callable[[Array], Any]]
"""Gives a gain of a network as a function of frequency."""


def draw_figures(reviewed: Reviewed) -> dict[str, str]:
    """Draw every figure of an amplifier.

    Parameters
    ----------
    reviewed : Reviewed
        The amplifier, predicted.

    Returns
    -------
    dict of str to str
        SVG text by name: the amplifier's name with ``_schematic``, ``_open_loop``,
        ``_common_mode``, ``_bias`` and ``_noise``.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_review
    >>> list(draw_figures(sample_review()))
    ['a1_schematic', 'a1_open_loop', 'a1_common_mode', 'a1_bias', 'a1_noise']
    """
    name, kinds = reviewed.plan.name, tuple(_list_kinds())
    with drawing():  # loads what every process of the crew needs
        save_figure(new_figure(_WIDTH, _WIDTH), "svg")
    with Crew(reviewed) as crew:
        drawn = crew.run(_draw, kinds)
    return {
        f"{name}_schematic": draw_schematic(reviewed.plan),
        **{f"{name}_{kind}": text for kind, text in zip(kinds, drawn, strict=True)},
    }


def _list_kinds() -> dict[str, Callable[[Reviewed], Figure]]:
    return {
        "open_loop": draw_open_loop, "common_mode": draw_common_mode, "bias": draw_bias,
        "noise": draw_noise,
    }  # fmt: skip


def _draw(reviewed: Reviewed, kind: str) -> str:
    """Draw one figure; a job of a crew."""
    with drawing():
        return save_figure(_list_kinds()[kind](reviewed), "svg").decode("utf-8")


def draw_open_loop(reviewed: Reviewed) -> Figure:
    """Draw gain and phase into the load, every condition at the nominal supply.

    Parameters
    ----------
    reviewed : Reviewed
        The amplifier, predicted.

    Returns
    -------
    Figure
        The lowest GBW and the lowest phase margin are marked.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_review
    >>> with drawing():
    ...     figure = draw_open_loop(sample_review())
    >>> [axes.get_ylabel() for axes in figure.axes]
    ['gain [dB]', 'phase [deg]']
    """
    cases = list(reviewed.predictions.values())
    crossings = [case.signal.gbw for case in cases]
    margins = [case.signal.phase_margin for case in cases]
    return _Loop.of(cases, differential_gain, crossings, margins).draw("gain [dB]")


def draw_common_mode(reviewed: Reviewed) -> Figure:
    """Draw gain and phase of the common-mode loop, every condition at the nominal supply.

    Parameters
    ----------
    reviewed : Reviewed
        The amplifier, predicted.

    Returns
    -------
    Figure
        The lowest crossing and the lowest phase margin are marked. The curves are what the
        bench reads, up to a little beyond the crossing, where its probe's own load sets in; in
        the condition of the lowest phase margin the loop without that load is drawn too.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_review
    >>> with drawing():
    ...     figure = draw_common_mode(sample_review())
    >>> [axes.get_ylabel() for axes in figure.axes]
    ['loop gain [dB]', 'phase [deg]']
    """
    cases = list(reviewed.predictions.values())
    crossings = [case.common_mode.gbw for case in cases]
    margins = [case.common_mode.phase_margin for case in cases]
    loop = _Loop.of(
        cases, lambda network: break_loop(network, PROBE), crossings, margins, reach=_BENCH_REACH
    )
    return loop.draw("loop gain [dB]", lambda network: DoubleInjection(network, PROBE))


@dataclass(frozen=True, eq=False)
class _Loop:
    """Gains over frequency, with their crossings and phase margins, by condition."""

    cases: Sequence[Prediction]
    measure: Measure
    crossings: Array
    margins: Array
    reach: float

    @classmethod
    def of(
        cls, cases: Sequence[Prediction], measure: Measure, crossings: Sequence[Array],
        margins: Sequence[Array], *, reach: float = np.inf,
    ) -> _Loop:  # fmt: skip
        """Take what belongs to the nominal supply; curves end at `reach` times their crossing."""
        picked = [
            [float(values[find_nominal(case)]) for values, case in zip(column, cases, strict=True)]
            for column in (crossings, margins)
        ]
        return cls(cases, measure, np.array(picked[0]), np.array(picked[1]), reach)

    @property
    def least(self) -> int | None:
        """Index of the lowest phase margin."""
        return int(np.nanargmin(self.margins)) if np.isfinite(self.margins).any() else None

    @property
    def frequency(self) -> Array:
        """Five decades, to beyond the highest crossing [Hz]."""
        known = self.crossings[np.isfinite(self.crossings)]
        low, high = (np.min(known), np.max(known)) if known.size else (1e6, 1e6)
        return np.geomspace(10 ** np.floor(np.log10(low) - 4.5), 10 * high, 241)

    def draw(self, label: str, exact: Measure | None = None) -> Figure:
        figure = new_figure(_WIDTH, 125)
        upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=(3, 2))
        frequency = self.frequency
        for index, case in enumerate(self.cases):
            end = self.reach * np.nan_to_num(self.crossings[index], nan=np.inf)
            style = _style(index, len(self.cases))
            looks = {"color": style.colour, "linestyle": style.dash, "label": str(case.condition)}
            _trace(upper, lower, case, self.measure, frequency[frequency <= end], **looks)
        if exact is not None and self.least is not None:
            case = self.cases[self.least]
            name = f"{case.condition}, no probe"
            _trace(upper, lower, case, exact, frequency, color="#111111", linewidth=0.8, label=name)
        upper.axhline(0, color="#404040", linewidth=0.8)
        lower.axhline(-180, color="#404040", linewidth=0.8)
        lower.set_ylim(bottom=max(lower.get_ylim()[0], -360))
        upper.set_ylim(bottom=max(upper.get_ylim()[0], -45))
        self.mark(upper, lower)
        upper.set_ylabel(label)
        lower.set_ylabel("phase [deg]")
        lower.set_yticks(np.arange(-45 * np.floor(-lower.get_ylim()[0] / 45), 1, 45))
        lower.set_xlabel("frequency [Hz]")
        lower.set_xlim(frequency[0], frequency[-1])
        _add_legend(figure, upper)
        return figure

    def mark(self, upper: Axes, lower: Axes) -> None:
        """Mark the lowest crossing and the lowest phase margin."""
        least = self.least
        if least is None:
            upper.set_title("The gain never exceeds 1.", loc="left")
            return
        slow = int(np.nanargmin(self.crossings))
        spot: dict[str, Any] = {
            "marker": "o", "color": "#111111", "markersize": 5.5, "linestyle": "none",
            "markerfacecolor": "white", "zorder": 5,
        }  # fmt: skip
        at = float(self.crossings[slow])
        upper.plot([at], [0.0], **spot)
        words = f"lowest GBW {format_quantity(at, 'Hz', digits=4)}\nin {self.cases[slow].condition}"
        _annotate(upper, words, (at, 0.0))
        at, margin = float(self.crossings[least]), float(self.margins[least])
        lower.plot([at, at], [-180.0, margin - 180.0], color="#111111", linewidth=1.6)
        lower.plot([at], [margin - 180.0], **spot)
        words = f"lowest phase margin {margin:.1f} deg\nin {self.cases[least].condition}"
        _annotate(lower, words, (at, margin - 180.0))


def _trace(
    upper: Axes, lower: Axes, case: Prediction, measure: Measure, frequency: Array, **looks: Any
) -> None:
    found = measure(case.network)(frequency)
    gain = np.broadcast_to(found, (*case.batch, frequency.size))[find_nominal(case)]
    upper.semilogx(frequency, to_db(gain), **looks)
    lower.semilogx(frequency, np.degrees(np.unwrap(np.angle(gain))), **looks)


def _annotate(axes: Axes, words: str, point: tuple[float, float]) -> None:
    """Write into the lower left corner, which the curves leave empty, with a line to a point."""
    axes.annotate(
        words, point, xytext=(0.03, 0.08), textcoords="axes fraction", va="bottom",
        arrowprops={"arrowstyle": "-", "color": "#404040", "linewidth": 0.7, "shrinkB": 4},
        bbox={"facecolor": "white", "edgecolor": "none", "pad": 1.5},
    )  # fmt: skip


def draw_noise(reviewed: Reviewed) -> Figure:
    """Draw the input noise density and the largest shares of it.

    Parameters
    ----------
    reviewed : Reviewed
        The amplifier, predicted.

    Returns
    -------
    Figure
        In the first condition at the nominal supply, with the noisiest condition beside it.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_review
    >>> with drawing():
    ...     figure = draw_noise(sample_review())
    >>> figure.axes[0].get_legend_handles_labels()[1][:2]
    ['total, tt/27', 'pair']
    """
    first, nominal = reviewed.first, find_nominal(reviewed.first)
    frequency = np.geomspace(1e2, 1e8, 121)
    figure = new_figure(_WIDTH, 88)
    axes = figure.add_subplot()
    noise = first.noise(frequency)
    gain = np.asarray(noise.input_power / noise.power)[nominal]
    total = noise.input_density[nominal]
    axes.loglog(
        frequency, total * 1e9, color="#111111", linewidth=2.2, label=f"total, {first.condition}"
    )
    worst, where = _find_noisiest(reviewed, frequency)
    if where != str(first.condition):
        label = f"total, {where} (noisiest)"
        axes.loglog(frequency, worst * 1e9, color="#111111", linestyle=(0, (5, 2)), label=label)
    power = {role: found[nominal] * gain for role, found in _sum_by_role(first, noise).items()}
    for index, role in enumerate(_rank(power)[:_MOST_SHARES]):
        style = choose_style(index)
        density = np.sqrt(power[role])
        axes.loglog(frequency, density * 1e9, label=role, markevery=20, **style.keywords)
    _mark_demand(axes, reviewed)
    axes.set_ylim(bottom=float(np.min(total)) * 1e9 / 30)
    axes.set_xlim(frequency[0], frequency[-1])
    axes.set_xlabel("frequency [Hz]")
    axes.set_ylabel(r"input noise density [nV/$\sqrt{\mathrm{Hz}}$]")
    axes.legend(loc="upper right", handlelength=3.5)
    return figure


def _find_noisiest(reviewed: Reviewed, frequency: Array) -> tuple[Array, str]:
    """Density in the condition whose noise is highest on the average, and its name."""
    found = [
        (case.noise(frequency).input_density[find_nominal(case)], str(case.condition))
        for case in reviewed.predictions.values()
    ]
    return max(found, key=lambda pair: float(np.mean(np.log(pair[0]))))


def _sum_by_role(case: Prediction, noise: Noise) -> dict[str, Array]:
    """Noise power at the output by place, all resistors as one."""
    roles = {one.name: one.role for one in case.circuit.transistors}
    found: dict[str, Array] = {}
    for owner, power in noise.by_owner().items():
        role = roles.get(owner, "resistors")
        found[role] = found.get(role, np.zeros(())) + power
    return found


def _rank(power: dict[str, Array]) -> list[str]:
    """Roles by their share of the power, on the average over the decades."""
    total = np.sum(list(power.values()), axis=0)
    return sorted(power, key=lambda role: -float(np.mean(power[role] / total)))


def _mark_demand(axes: Axes, reviewed: Reviewed) -> None:
    demand = reviewed.plan.demands.get("input_noise")
    if demand is None or demand.at is None:
        return
    axes.plot([demand.at], [demand.value * 1e9], marker="v", color="#111111", markersize=7,
              linestyle="none", label="at most, as asked")  # fmt: skip


def _style(index: int, total: int) -> Style:
    """Colour and dash of a condition; more than eight take a second round of dashes."""
    return choose_style(index % _COLOURS, None if total <= _COLOURS else index // _COLOURS)


def _add_legend(figure: Figure, axes: Axes) -> None:
    handles, labels = axes.get_legend_handles_labels()
    columns = min(4, len(labels))
    figure.legend(handles, labels, loc="outside lower center", handlelength=4.0, ncols=columns)
