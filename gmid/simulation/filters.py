"""Run the deck of a whole filter in the reference simulator and read off what was predicted."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.decks import RAMP, write_netlists
from gmid.amplifier.filtering.circuit import list_pieces
from gmid.amplifier.filtering.decks import write_filter_deck
from gmid.amplifier.filtering.positions import place_plans
from gmid.amplifier.plan import AmplifierPlan, Supply
from gmid.device.device import Device
from gmid.errors import UsageFault
from gmid.filters.realisation import Realisation
from gmid.simulation.results import AcResult, TransientResult
from gmid.simulation.runner import run_deck

Array = NDArray[np.float64]

PARTS = ("ac", "startup", "distortion")
"""What may be simulated."""

_ANALYSIS = re.compile(r"^\.ac\b.*$", re.MULTILINE)
_PERIODS = 6
"""Periods of the sine until the last one is taken; more where the filter settles slowly."""

_STEPS = 400
_SAMPLES = 1024
_SETTLE = 10.0


@dataclass(frozen=True, eq=False)
class SimulatedFilter:
    """What the simulator says of a whole filter in one condition.

    Parameters
    ----------
    frequency : ndarray, shape (nf,)
        Of the AC analysis [Hz].
    response : ndarray of complex, shape (nf,)
        From the differential input to the differential output [-].
    node_voltages : dict of str to float
        At the end of the start-up, by the names of the prediction [V].
    startup_error : float
        Largest distance of a node from the simulator's own bias point at that end [V].
    amplitude : float
        Of the fundamental at the output, of the distortion part [V].
    harmonic_db : float
        Third harmonic over fundamental [dB].

    Examples
    --------
    >>> SimulatedFilter(harmonic_db=-61.5)
    SimulatedFilter(harmonic_db=-61.5)
    """

    frequency: Array = field(default_factory=lambda: np.zeros(0))
    response: NDArray[np.complex128] = field(default_factory=lambda: np.zeros(0, dtype=complex))
    node_voltages: dict[str, float] = field(default_factory=dict)
    startup_error: float = np.nan
    amplitude: float = np.nan
    harmonic_db: float = np.nan

    @property
    def gain_db(self) -> Array:
        """Gain over frequency, shape (nf,) [dB]."""
        return np.asarray(20 * np.log10(np.abs(self.response)))

    def __repr__(self) -> str:
        parts = [
            f"{name}={value:.6g}"
            for name, value in vars(self).items()
            if isinstance(value, float) and not np.isnan(value)
        ]
        if self.frequency.size:
            parts.insert(0, f"{self.frequency.size} frequencies")
        return f"SimulatedFilter({', '.join(parts)})"


def simulate_filter(
    realisation: Realisation, plans: Sequence[AmplifierPlan], supply: Supply,
    devices: Mapping[str, Device], models: str, *, voltage: float | None = None,
    rscale: float = 1.0, cscale: float = 1.0, parts: Sequence[str] = PARTS,
    tone: tuple[float, float] | None = None,
) -> SimulatedFilter:  # fmt: skip
    """Run the deck of a filter.

    Parameters
    ----------
    realisation : Realisation
        Sections and elements.
    plans : sequence of AmplifierPlan
        Distinct amplifiers with their positions.
    supply : Supply
        What they are fed with.
    devices : mapping of str to Device
        Where the device lines come from.
    models : str
        Contents of `models.inc`: model cards of one corner and ``.options temp=``.
    voltage : float, optional
        Supply [V]; the nominal one by default.
    rscale, cscale : float
        Corner of the filter's resistors and capacitors [-].
    parts : sequence of str
        Of `PARTS`.
    tone : tuple of float, optional
        Frequency [Hz] and peak differential input [V] of the distortion part, which needs it.

    Returns
    -------
    SimulatedFilter
        What was not asked for is not-a-number or empty.

    Raises
    ------
    MissingExtra
        If the simulator is not installed.
    UsageFault
        If the distortion part has no tone.
    NoSolution
        If it does not converge.
    DataFault
        If a position has no amplifier.

    Examples
    --------
    >>> from dataclasses import replace
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> plan = replace(example_plan(), positions=("A1",))
    >>> simulate_filter(made, [plan], example_supply(), example_devices(), "", parts=[])
    SimulatedFilter()
    """
    by_position = place_plans(plans, realisation)
    files = {"amplifier.cir": write_netlists(plans, supply, devices)["amplifier.cir"],
             "models.inc": models}  # fmt: skip
    deck = write_filter_deck(realisation, by_position, supply)
    level = supply.voltage if voltage is None else voltage
    for name, value in (("vsupply", level), ("rscale", rscale), ("cscale", cscale)):
        deck = re.sub(rf"^\.param {name}=.*$", f".param {name}={value:.12g}", deck,
                      flags=re.MULTILINE)  # fmt: skip
    found: dict[str, object] = {}
    for part in parts:
        if part == "ac":
            found |= _read_ac(deck, files)
        elif part == "startup":
            found |= _read_startup(deck, files, realisation)
        elif part == "distortion":
            if tone is None:
                raise UsageFault("the distortion part needs a tone: frequency and amplitude.")
            found |= _read_distortion(deck, files, realisation, tone)
        else:
            raise UsageFault(f"there is no part {part!r}.", hint=f"Choose of {', '.join(PARTS)}.")
    return SimulatedFilter(**found)  # type: ignore[arg-type]


def _read_ac(deck: str, files: Mapping[str, str]) -> dict[str, object]:
    result = run_deck(deck, files=files)
    assert isinstance(result, AcResult)
    return {"frequency": result.frequency, "response": result.voltage("vdiff")}


def _settling_time(realisation: Realisation) -> float:
    """Give the time in which a filter settles: ten time constants of its slowest pole [s]."""
    slowest = min(float(np.min(-one.poles.real)) for one in realisation.sections)
    return _SETTLE / slowest


def _read_startup(
    deck: str, files: Mapping[str, str], realisation: Realisation
) -> dict[str, object]:
    rest = run_deck(_ANALYSIS.sub(".op", deck), files=files)
    length = 10 * RAMP + _settling_time(realisation)
    ramped = re.sub(
        r"^vdd vdd 0 \{vsupply\}$", f"vdd vdd 0 dc {{vsupply}} pwl(0 0 {RAMP:.6g} {{vsupply}})",
        deck, flags=re.MULTILINE,
    )  # fmt: skip
    ramped = re.sub(
        r"^(iref_\S+ \S+ \S+) (\S+)$", rf"\1 dc \2 pwl(0 0 {RAMP:.6g} \2)", ramped,
        flags=re.MULTILINE,
    )  # fmt: skip
    result = run_deck(_ANALYSIS.sub(f".tran {RAMP / 200:.6g} {length:.6g}", ramped), files=files)
    assert isinstance(result, TransientResult)
    ends = {name: float(result.signals[name][-1]) for name in rest.signals if name[:2] == "v("}
    errors = [abs(end - float(rest.signals[name][0])) for name, end in ends.items()]
    nodes = {_rename(name[2:-1], realisation): end for name, end in ends.items()}
    return {"node_voltages": nodes, "startup_error": max(errors)}


def _rename(node: str, realisation: Realisation) -> str:
    """Name a node of the simulator as the prediction does."""
    if node in ("vop", "von"):
        return f"{realisation.output}_{node[-1]}"
    head, dot, rest = node.partition(".")
    positions = {f"x{place.name.lower()}": place.name for place in realisation.amplifiers}
    if dot and head in positions:
        return f"{positions[head]}_{rest}"
    known = {end.lower(): end for piece in list_pieces(realisation) for end in piece.nodes}
    references = {f"iref_{place.name.lower()}": place.name for place in realisation.amplifiers}
    return f"{references[node]}_iref" if node in references else known.get(node, node)


def _read_distortion(
    deck: str, files: Mapping[str, str], realisation: Realisation, tone: tuple[float, float]
) -> dict[str, object]:
    from scipy.interpolate import CubicSpline

    frequency, amplitude = tone
    period = 1 / frequency
    periods = max(_PERIODS, int(np.ceil(1 + _settling_time(realisation) / period)))
    driven = re.sub(
        r"^vid .*$", f"vid vid 0 dc 0 sin(0 {amplitude:.10g} {frequency:.10g})", deck,
        flags=re.MULTILINE,
    )  # fmt: skip
    step = period / _STEPS
    line = f".tran {step:.8g} {periods * period:.10g} 0 {step:.8g}"
    result = run_deck(_ANALYSIS.sub(line, driven), files=files)
    assert isinstance(result, TransientResult)
    times = period * (periods - 1 + np.arange(_SAMPLES) / _SAMPLES)
    output = CubicSpline(result.time, result.voltage("vdiff"))(times)
    spectrum = np.abs(np.fft.rfft(output))
    return {
        "amplitude": float(2 * spectrum[1] / _SAMPLES),
        "harmonic_db": float(20 * np.log10(spectrum[3] / spectrum[1])),
    }
