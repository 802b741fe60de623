"""The keys of requests and plans, table by table."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from gmid.documents import (
    AUTO,
    Capacitance,
    CapacitanceDensity,
    CapacitancePerResistance,
    ConditionText,
    Count,
    Current,
    Decibel,
    Degrees,
    Flag,
    Frequency,
    Length,
    MatchingRatio,
    MatchingVoltage,
    Model,
    Parsed,
    PositiveVoltage,
    Ratio,
    Resistance,
    SupplyLevel,
    Text,
    Unit,
    Voltage,
)
from gmid.documents.fields import Level
from gmid.request.requirements import DemandKeys


class DeviceKeys(Model):
    """``[process.devices]``: device names of the table by role."""

    n: Text
    p: Text
    pair: Text | None = None
    follower: Text | None = None
    cascode: Text | None = None


class ProcessKeys(Model):
    """``[process]``."""

    table: Text
    digest: Text | None = None
    conditions: tuple[ConditionText, ...] | None = None
    own_well: tuple[Text, ...] = ()
    devices: DeviceKeys


class SupplyKeys(Model):
    """``[supply]``."""

    voltage: PositiveVoltage
    tolerance: Ratio = 0.0
    common_mode: SupplyLevel = Level(0.5, is_share=True)
    input_common_mode: SupplyLevel | None = None
    reference_current: Current
    reference_tolerance: Ratio = 0.0


def _read_edge(value: object) -> float | tuple[float, float]:
    """Read a frequency, or a pair of them."""
    frequency = Unit("Hz", above=0.0)
    if isinstance(value, (tuple, list)) and len(value) == 2:
        return frequency.read(value[0]), frequency.read(value[1])
    return frequency.read(value)


Edge = Annotated[Any, Parsed(_read_edge)]
Frequencies = tuple[Frequency, Frequency]


class SectionKeys(Model):
    """``[[filter.sections]]``."""

    f0: Frequency | None = None
    q: float | int | None = None
    k2: float | int = 0.0
    k1: float | int = 0.0
    k0: float | int = 0.0


class FilterKeys(Model):
    """``[filter]``."""

    response: Literal[
        "butterworth", "chebyshev", "inverse-chebyshev", "elliptic", "bessel", "sections"
    ]
    kind: Literal["lowpass", "highpass", "bandpass"] = "lowpass"
    order: Annotated[Count | None, AUTO] = None
    edge: Edge | None = None
    ripple: Decibel | None = None
    stop_edge: Edge | None = None
    attenuation: Decibel | None = None
    gain: Decibel | None = None
    style: Literal["active-rc", "gm-c"] = "active-rc"
    swing: Voltage | None = None
    snr: Decibel | None = None
    noise_band: Frequencies | None = None
    distortion: Decibel | None = None
    distortion_at: Frequency | None = None
    capacitor: Annotated[Capacitance | None, AUTO] = None
    smallest_capacitor: Capacitance = 0.0
    largest_resistor: Resistance = float("inf")
    source_resistance: Resistance = 0.0
    load_capacitance: Capacitance = 0.0
    load_resistance: Resistance = float("inf")
    correct_elements: Literal["none", "nominal"] = "none"
    sections: tuple[SectionKeys, ...] = ()
    numerator: tuple[float | int, ...] = ()
    denominator: tuple[float | int, ...] = ()


class ToleranceKeys(Model):
    """``[tolerance]``."""

    passband: Decibel
    counts: Literal["all", "shape", "tuned-shape"] = "all"
    stopband: Decibel = 1.0
    up_to: Frequency | None = None
    delay: Ratio | None = None


class PassiveKeys(Model):
    """``[passives]``."""

    capacitor_density: CapacitanceDensity | None = None
    bottom_plate: Ratio = 0.0
    capacitor_spread: Ratio = 0.0
    unit_capacitor: Capacitance | None = None
    resistor_sheet: Resistance | None = None
    resistor_capacitance: CapacitancePerResistance = 0.0
    resistor_spread: Ratio = 0.0
    unit_resistor: Resistance | None = None


class AmplifierKeys(Model):
    """``[amplifier]``."""

    input_pair: Literal["n", "p", "auto"] = "auto"
    output: Literal["plain", "cascoded", "auto"] = "auto"
    common_mode_sense: Literal["resistors", "followers", "pairs", "auto"] = "auto"
    largest_sense_resistor: Resistance = 1e6
    loop_phase_margin: Degrees = 60.0
    common_mode_phase_margin: Degrees = 60.0
    saturation_margin: Voltage = 0.05
    lengths: Annotated[tuple[Length, ...] | None, AUTO] = None
    smallest_length: dict[str, Length] = {}  # noqa: RUF012 - the model library copies it
    largest_count: Count = 64
    largest_stack: Count = 4
    even_counts: Flag = True
    minimise: Literal["current", "area"] = "current"


class MatchingKeys(Model):
    """An entry of ``[matching]``."""

    avt: MatchingVoltage
    abeta: MatchingRatio = 0.0


class _Common(Model):
    title: Text = "An amplifier"
    process: ProcessKeys
    supply: SupplyKeys
    filter: FilterKeys | None = None
    tolerance: ToleranceKeys | None = None
    passives: PassiveKeys = PassiveKeys()
    amplifier: AmplifierKeys = AmplifierKeys()
    matching: dict[str, MatchingKeys] = {}  # noqa: RUF012 - the model library copies it
    demands: DemandKeys | None = None


class RequestKeys(_Common):
    """A request file."""


class TransistorKeys(Model):
    """An entry of ``[plan.transistors]``."""

    device: Text
    length: Length
    count: int | float
    stack: int | float = 1
    bulk: Literal["rail", "source"] = "rail"


class PlanKeys(Model):
    """``[[plan]]``."""

    name: Text
    positions: tuple[Text, ...] = ()
    multiple: int = 1
    input_pair: Literal["n", "p"]
    output: Literal["plain", "cascoded"]
    common_mode_sense: Literal["resistors", "followers", "pairs"]
    load_capacitance: Capacitance
    load_resistance: Resistance = float("inf")
    sense_resistance: Resistance | None = None
    sense_capacitance: Capacitance | None = None
    error_resistance: Resistance | None = None
    error_capacitance: Capacitance | None = None
    output_capacitance: Capacitance | None = None
    transistors: dict[str, TransistorKeys]
    demands: DemandKeys = DemandKeys()


class PlanFileKeys(_Common):
    """A plan file."""

    plan: tuple[PlanKeys, ...]
