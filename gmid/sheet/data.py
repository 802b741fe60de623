"""A sheet as pure data: numbers in SI, ready to be printed or written as JSON."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, fields, is_dataclass
from typing import Any

FORMAT = 1
"""Number of the JSON form."""


@dataclass(frozen=True, kw_only=True)
class Demand:
    """What is asked of an amplifier, and why."""

    value: float
    unit: str
    because: str
    at: float | None = None


@dataclass(frozen=True, kw_only=True)
class TransistorRow:
    """One instance at the first condition and nominal supply.

    `headroom` is vds less vdsat [V]; `worst_headroom` the least of all conditions and supplies.
    """

    name: str
    role: str
    device: str
    length: float
    unit_width: float
    count: int
    stack: int
    bulk: str
    id: float
    gm_over_id: float
    vgs: float
    vds: float
    vsb: float
    vdsat: float
    headroom: float
    worst_headroom: float
    worst_condition: str


@dataclass(frozen=True, kw_only=True)
class NoisePoint:
    """Input noise density [V/sqrt(Hz)] at a frequency [Hz]."""

    frequency: float
    density: float


@dataclass(frozen=True, kw_only=True)
class CommonModeRow:
    """The common-mode loop in one condition.

    `phase_margin` is the bench's, whose probe does not see the load of the gates it drives;
    `loop_margin` that of the loop itself, by which it is judged [deg].
    """

    dc_gain_db: float
    gbw: float
    phase_margin: float
    loop_margin: float
    input_to_output_gain_db: float
    supply_to_output_gain_db: float
    settled_error: float


@dataclass(frozen=True, kw_only=True)
class ConditionRow:
    """An amplifier in one condition at one supply: what its benches measure.

    `sense_range` is the peak differential output up to which the common mode is sensed [V]; None
    where it is sensed throughout.
    """

    corner: str
    temperature: float
    supply: float
    dc_gain_db: float
    gbw: float
    phase_margin: float
    gm_total: float
    excess_pole: float
    input_noise: tuple[NoisePoint, ...]
    supply_current: float
    power: float
    slew_rate: float
    settling_time: float
    output_swing: float
    swing_by_gain: float
    swing_by_saturation: float
    sense_range: float | None
    control_share: float
    node_voltages: Mapping[str, float]
    common_mode: CommonModeRow


@dataclass(frozen=True, kw_only=True)
class CheckRow:
    """One requirement and the worst that was found; `margin` is relative [-]."""

    name: str
    required: float
    achieved: float
    unit: str
    condition: str
    margin: float
    met: bool
    because: str = ""


@dataclass(frozen=True, kw_only=True)
class Passive:
    """A resistor or capacitor of an amplifier, by its netlist name."""

    name: str
    kind: str
    value: float


@dataclass(frozen=True, kw_only=True)
class Share:
    """Part of the input-referred noise power that one place makes [-]."""

    role: str
    share: float


@dataclass(frozen=True, kw_only=True)
class NoiseShares:
    """Who makes the noise at a frequency [Hz], at the first condition and nominal supply."""

    frequency: float
    shares: tuple[Share, ...]


@dataclass(frozen=True, kw_only=True)
class Limit:
    """The least of all conditions and supplies [V], where, and the instance that ends it."""

    value: float
    condition: str
    cause: str


@dataclass(frozen=True, kw_only=True)
class AmplifierSheet:
    """One distinct amplifier."""

    name: str
    positions: tuple[str, ...]
    multiple: int
    input_pair: str
    output: str
    common_mode_sense: str
    load_capacitance: float
    load_resistance: float | None
    demands: Mapping[str, Demand]
    transistors: tuple[TransistorRow, ...]
    passives: tuple[Passive, ...]
    conditions: tuple[ConditionRow, ...]
    checks: tuple[CheckRow, ...]
    noise_shares: tuple[NoiseShares, ...]
    gate_area: float
    input_range: tuple[float, float]
    output_limit: Limit | None = None
    sense_limit: Limit | None = None
    offset_sigma: float | None = None
    offset_shares: tuple[Share, ...] = ()
    supply_rejection_db: float | None = None
    common_mode_rejection_db: float | None = None
    floor_current: float | None = None
    ratio_to_floor: float | None = None

    @property
    def is_met(self) -> bool:
        """Whether every check holds."""
        return all(check.met for check in self.checks)


@dataclass(frozen=True, kw_only=True)
class SectionRow:
    """One section of the filter, normalised to its w0."""

    f0: float
    q: float | None
    k2: float
    k1: float
    k0: float


@dataclass(frozen=True, kw_only=True)
class ElementRow:
    """One element of the filter, per side."""

    name: str
    kind: str
    value: float
    nodes: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class ResponseRow:
    """The realised response in one condition."""

    condition: str
    tuned: bool
    frequency: tuple[float, ...]
    gain_db: tuple[float, ...]
    deviation_db: tuple[float, ...]


@dataclass(frozen=True, kw_only=True)
class FilterSheet:
    """The filter: what was asked, what it is made of, what it does."""

    description: str
    sections: tuple[SectionRow, ...]
    elements: tuple[ElementRow, ...]
    response: tuple[ResponseRow, ...]
    checks: tuple[CheckRow, ...] = ()
    total_capacitance: float = 0.0
    total_resistance: float = 0.0
    area: float | None = None
    facts: tuple[tuple[str, str], ...] = ()


@dataclass(frozen=True, kw_only=True)
class Sheet:
    """Everything a design review reads."""

    title: str
    amplifiers: tuple[AmplifierSheet, ...]
    filter: FilterSheet | None = None
    supply: str = ""
    cautions: tuple[str, ...] = ()
    provenance: tuple[tuple[str, str], ...] = ()
    sentence: str = ""
    is_demanded: bool = True
    figures: Mapping[str, str] = field(default_factory=dict)

    @property
    def is_met(self) -> bool:
        """Whether every check of every amplifier and of the filter holds."""
        checks = self.filter.checks if self.filter else ()
        return all(one.is_met for one in self.amplifiers) and all(one.met for one in checks)

    @property
    def verdict(self) -> str:
        """``met`` or ``missed``."""
        return "met" if self.is_met else "missed"

    @property
    def checks(self) -> tuple[tuple[str, CheckRow], ...]:
        """Every check with the part it belongs to, the one with the least margin first."""
        found = [(one.name, check) for one in self.amplifiers for check in one.checks]
        found += [("filter", check) for check in (self.filter.checks if self.filter else ())]
        return tuple(sorted(found, key=lambda pair: pair[1].margin))

    def __repr__(self) -> str:
        return (
            f"Sheet({self.title!r}, {self.verdict}, {len(self.amplifiers)} amplifiers, "
            f"{len(self.checks)} checks)"
        )

    def _repr_html_(self) -> str:
        """Show the page in a frame of its own, so that neither style reaches the other."""
        from html import escape

        from gmid.sheet.html import write_html
        from gmid.sheet.outline import lay_out

        page = write_html(lay_out(self), self.figures, title=self.title)
        # without a base of its own, links inside the frame would lead to the page around it
        page = page.replace("<head>", '<head>\n<base href="about:srcdoc">', 1)
        return (
            f'<iframe srcdoc="{escape(page)}" sandbox="allow-same-origin" '
            f'title="{escape(self.title)}" '
            'style="width: 100%; height: 50em; border: 1px solid #888; background: #fff"></iframe>'
        )

    def to_json(self) -> dict[str, Any]:
        """Give the sheet as plain data.

        Returns
        -------
        dict
            With ``format`` and ``verdict``; numbers that are not finite are null, and figures
            are left out.
        """
        data: dict[str, Any] = {"format": FORMAT, "title": self.title, "verdict": self.verdict}
        body = to_plain(self)
        body.pop("figures")
        body.pop("is_demanded")
        body.pop("title")
        if body["filter"] is None:
            body.pop("filter")
        for part in body["amplifiers"]:
            if part["load_resistance"] is None:
                part.pop("load_resistance")
        data.update(body)
        return data


def to_plain(value: Any) -> Any:
    """Turn dataclasses, tuples and numbers into what JSON knows.

    Parameters
    ----------
    value : object
        A sheet or a part of one.

    Returns
    -------
    object
        Dicts, lists, texts, numbers; None for numbers that are not finite.

    Examples
    --------
    >>> to_plain(NoisePoint(frequency=1e3, density=float("nan")))
    {'frequency': 1000.0, 'density': None}
    """
    if is_dataclass(value) and not isinstance(value, type):
        return {one.name: to_plain(getattr(value, one.name)) for one in fields(value)}
    if isinstance(value, Mapping):
        return {str(key): to_plain(entry) for key, entry in value.items()}
    if isinstance(value, Sequence) and not isinstance(value, str):
        return [to_plain(entry) for entry in value]
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    return value
