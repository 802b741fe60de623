"""The impedance level: the smallest capacitor that meets the signal-to-noise ratio."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import DataFault
from gmid.filters.noise import FilterNoise, measure_noise
from gmid.filters.passives import Passives
from gmid.filters.realisation import Amplifiers, Realisation
from gmid.filters.realise import design_sections, realise
from gmid.filters.rounding import round_elements
from gmid.filters.sections import Section
from gmid.filters.spec import FilterSpec
from gmid.filters.spec_checks import name_key

LARGEST_CAPACITOR = 1e-9
"""Largest integrating capacitor on a chip, per side: about 1 mm^2 at 1 fF/um^2 [F]; common
practice."""

_PROBE = 1e-12
_STEPS = 40
_STEP = 1.005
_ACCURACY = 1e-5
_MARGIN = 1e-9

ChooseAmplifiers = Callable[[Realisation], Amplifiers]
"""Gives the amplifiers of a realisation at its impedance level."""


@dataclass(frozen=True, eq=False)
class Level:
    """A realisation at its impedance level, and what set it.

    Parameters
    ----------
    realisation : Realisation
        Rounded to units where there are any.
    because : str
        Key that set the capacitor, such as ``filter.snr``.
    noise : FilterNoise, optional
        Of the rounded realisation; absent without a noise band.
    snr_db : float, optional
        Worst of all conditions; absent without a swing [dB].

    Examples
    --------
    >>> from gmid.filters import FilterSpec, choose_capacitor
    >>> spec = FilterSpec(response="bessel", order=2, edge=1e6, capacitor=3e-12)
    >>> choose_capacitor(spec)
    Level(3e-12 F because of filter.capacitor)
    """

    realisation: Realisation
    because: str
    noise: FilterNoise | None = None
    snr_db: float | None = None

    @property
    def capacitor(self) -> float:
        """Integrating capacitor before rounding, per side [F]."""
        return self.realisation.capacitor

    def __repr__(self) -> str:
        snr = "" if self.snr_db is None else f", {self.snr_db:.2f} dB"
        return f"Level({self.capacitor:.4g} F because of {self.because}{snr})"


@dataclass(frozen=True)
class Bound:
    """A bound of the integrating capacitor and the key it comes from.

    Parameters
    ----------
    value : float
        [F].
    key : str
        Key of the request.

    Examples
    --------
    >>> Bound(1e-12, "filter.smallest_capacitor").value
    1e-12
    """

    value: float
    key: str


def choose_capacitor(
    spec: FilterSpec, *, passives: Passives | None = None,
    sections: Sequence[Section] | None = None,
    amplifiers: Amplifiers | ChooseAmplifiers = None, temperature: ArrayLike = 27.0,
    rscale: ArrayLike = 1.0, cscale: ArrayLike = 1.0,
) -> Level:  # fmt: skip
    """Choose the smallest capacitor that gives the wanted signal-to-noise ratio.

    A capacitor that the specification fixes is kept.

    Parameters
    ----------
    spec : FilterSpec
        The specification.
    passives : Passives, optional
        Units and what elements bring along; with a unit capacitor the level is a whole number
        of units.
    sections : sequence of Section, optional
        In place of `design_sections`.
    amplifiers : AmplifierModel, mapping, or callable, optional
        Amplifiers whose noise counts; a callable gives them for each level that is tried.
    temperature, rscale, cscale : array_like, shape (...)
        Conditions [degC], [-]; the worst one counts.

    Returns
    -------
    Level
        The realisation, rounded to units.

    Raises
    ------
    DataFault
        If there is neither a capacitor nor an snr, or no capacitor within the bounds does;
        `where` is the key.

    Examples
    --------
    >>> spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5, swing=0.6,
    ...                   snr_db=66.0, noise_band=(1e3, 400e3))
    >>> choose_capacitor(spec)
    Level(2.892e-12 F because of filter.snr, 66.00 dB)
    """
    chosen = tuple(design_sections(spec) if sections is None else sections)
    # without the source and the load, which limit the level but do not change what is wanted
    free = spec.with_values(
        source_resistance=0.0, load_capacitance=0.0, load_resistance=math.inf, capacitor=None
    )
    probe = realise(free, capacitor=_PROBE, passives=passives, sections=chosen)
    lower, upper = find_bounds(spec, probe)
    problem = _Problem(spec, chosen, passives, amplifiers, temperature, rscale, cscale)
    if spec.capacitor is not None:
        _check_fixed(spec.capacitor, lower, upper)
        return problem.finish(Bound(spec.capacitor, name_key("capacitor")))
    if spec.snr_db is None and lower.value == 0:
        raise DataFault("nothing sets the capacitor.", where=name_key("capacitor"),
                        hint="Give capacitor, snr or smallest_capacitor.")  # fmt: skip
    if lower.value > upper.value:
        raise DataFault(
            f"{lower.key} asks for at least {lower.value:.4g} F per integrator, {upper.key} for "
            f"at most {upper.value:.4g} F.", where=lower.key, hint="Relax one of them.",
        )  # fmt: skip
    if spec.snr_db is None:
        return problem.finish(lower)
    return problem.finish(_search(spec, problem, lower, upper))


def find_bounds(spec: FilterSpec, probe: Realisation) -> tuple[Bound, Bound]:
    """Find between which integrating capacitors all elements can be made.

    Parameters
    ----------
    spec : FilterSpec
        With the bounds.
    probe : Realisation
        The filter at any level, with an ideal source and without a load.

    Returns
    -------
    lower, upper : Bound
        The tightest on either side.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> spec = FilterSpec(response="butterworth", order=1, edge=1e6, largest_resistor=1e5)
    >>> lower, upper = find_bounds(spec, realise(spec, capacitor=1e-12))
    >>> lower.key, round(lower.value * 1e12, 4), upper.value
    ('filter.largest_resistor', 1.5915, 1e-09)
    """
    level = probe.capacitor
    capacitors = [e.value for e in probe.elements if e.kind == "capacitor" and e.value > 0]
    resistors = [e.value for e in probe.elements if e.kind == "resistor"]
    lower = [Bound(level * spec.smallest_capacitor / min(capacitors), "filter.smallest_capacitor")]
    if probe.passives.unit_capacitor is not None:
        units = level * probe.passives.unit_capacitor / min(capacitors)
        lower.append(Bound(units, "passives.unit_capacitor"))
    if resistors:
        largest = level * max(resistors) / spec.largest_resistor
        lower.append(Bound(largest, "filter.largest_resistor"))
    upper = [Bound(LARGEST_CAPACITOR, "the largest capacitor on a chip")]
    lower += _bound_load(spec, probe)
    at_input = [e for e in probe.elements if "in" in e.nodes]
    if len(at_input) == 1 and at_input[0].kind == "resistor" and spec.source_resistance:
        most = level * at_input[0].value / spec.source_resistance
        upper.append(Bound(most * (1 - _MARGIN), "filter.source_resistance"))
    return max(lower, key=lambda b: b.value), min(upper, key=lambda b: b.value)


def _bound_load(spec: FilterSpec, probe: Realisation) -> list[Bound]:
    """Bound a gm-c filter by its load, which is part of the last node."""
    found: list[Bound] = []
    if probe.style != "gm-c":
        return found
    last = probe.elements[-1].section
    for element in probe.elements:
        if element.section != last or element.value == 0:
            continue
        if element.nodes == (probe.output, "0"):
            need = probe.capacitor * spec.load_capacitance / element.value
            found.append(Bound(need * (1 + _MARGIN), "filter.load_capacitance"))
        elif element.role in ("q", "f"):
            need = probe.capacitor / (spec.load_resistance * element.value)
            found.append(Bound(need * (1 + _MARGIN), "filter.load_resistance"))
    return found


def _check_fixed(value: float, lower: Bound, upper: Bound) -> None:
    for bound, wrong, word in (
        (lower, value < lower.value * (1 - _MARGIN), "at least"),
        (upper, value > upper.value, "at most"),
    ):
        if wrong:
            raise DataFault(
                f"capacitor = {value:.4g} F, but {bound.key} asks for {word} {bound.value:.4g} F "
                "per integrator.", where=name_key("capacitor"), hint="Change one of them.",
            )  # fmt: skip


@dataclass(frozen=True, eq=False)
class _Problem:
    """All that is needed to judge one capacitor."""

    spec: FilterSpec
    sections: tuple[Section, ...]
    passives: Passives | None
    amplifiers: Amplifiers | ChooseAmplifiers
    temperature: ArrayLike
    rscale: ArrayLike
    cscale: ArrayLike

    def make(self, capacitor: float) -> Realisation:
        return realise(
            self.spec, capacitor=capacitor, passives=self.passives, sections=self.sections
        )

    def noise(self, realisation: Realisation) -> FilterNoise:
        assert self.spec.noise_band is not None
        given = self.amplifiers
        return measure_noise(
            realisation, self.spec.noise_band,
            given(realisation) if callable(given) else given,
            temperature=self.temperature, rscale=self.rscale, cscale=self.cscale,
        )  # fmt: skip

    def finish(self, bound: Bound) -> Level:
        """Round; where that spoils the ratio that set the level, go up until it is met."""
        capacitor = self._whole_units(bound.value)
        for _ in range(_STEPS):
            level = self._judge(capacitor, bound.key)
            if bound.key != name_key("snr_db") or self._is_met(level):
                return level
            capacitor = self._whole_units(capacitor * _STEP)
        raise DataFault(
            f"rounded to units, the elements do not reach an snr of {self.spec.snr_db:g} dB.",
            where="passives.unit_resistor", hint="Use smaller units.",
        )  # fmt: skip

    def _judge(self, capacitor: float, key: str) -> Level:
        made = round_elements(self.make(capacitor))
        if self.spec.noise_band is None:
            return Level(made, key)
        noise = self.noise(made)
        if self.spec.swing is None:
            return Level(made, key, noise)
        return Level(made, key, noise, float(np.min(noise.snr_db(self.spec.swing))))

    def _is_met(self, level: Level) -> bool:
        assert level.snr_db is not None
        assert self.spec.snr_db is not None
        return level.snr_db >= self.spec.snr_db

    def _whole_units(self, capacitor: float) -> float:
        unit = None if self.passives is None else self.passives.unit_capacitor
        if unit is None or self.spec.capacitor is not None:
            return capacitor
        return math.ceil(capacitor / unit - 1e-6) * unit


def _search(spec: FilterSpec, problem: _Problem, lower: Bound, upper: Bound) -> Bound:
    """Solve ``N(C) = wanted``; N is nearly ``a/C + b``, so secants over 1/C converge at once."""
    assert spec.snr_db is not None
    assert spec.swing is not None
    wanted = spec.swing**2 / 2 / 10 ** (spec.snr_db / 10)
    floor = max(lower.value, 1e-18)

    def excess(inverse: float) -> float:
        return float(np.max(problem.noise(problem.make(1 / inverse)).power)) / wanted - 1.0

    if excess(1 / floor) <= 0:
        return Bound(floor, lower.key)
    smallest = excess(1 / upper.value)
    if smallest > 0:
        raise DataFault(
            f"an snr of {spec.snr_db:g} dB at a swing of {spec.swing:g} V is out of reach: with "
            f"{upper.value:.4g} F per integrator, the most that {upper.key} allows, it is "
            f"{spec.snr_db - 10 * math.log10(1 + smallest):.2f} dB.", where=name_key("snr_db"),
            hint="Ask for less, or for more swing, or a narrower noise_band.",
        )  # fmt: skip
    from scipy.optimize import brentq

    found = 1 / float(brentq(
        excess, 1 / upper.value, 1 / floor, rtol=_ACCURACY / 10, xtol=1e-300
    ))  # fmt: skip
    return Bound(found * (1 + _ACCURACY), name_key("snr_db"))
