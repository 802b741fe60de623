"""The loop between a filter and its amplifiers.

Demands need the amplifiers' own capacitances and noise, amplifiers need the demands: rounds find
demands, size an amplifier where that at hand misses them, and read what it brings along.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from gmid.amplifier.checks import judge
from gmid.amplifier.filtering.grouping import (
    OVERHEAD,
    Efficiency,
    Grouping,
    describe_grouping,
    find_noise_frequency,
    group_positions,
    make_plans,
    regroup,
)
from gmid.amplifier.filtering.levelling import level_filter
from gmid.amplifier.filtering.poles import (
    BUILT_SHARES,
    OWN_SHARES,
    WHITE_NOISE_FACTOR,
    estimate_noise_factor,
    estimate_pole,
)
from gmid.amplifier.filtering.result import FilterSizing
from gmid.amplifier.filtering.reviewing import review_filter
from gmid.amplifier.filtering.sized import Sized
from gmid.amplifier.filtering.transconductors import choose_multiples, find_unit, fit_elements
from gmid.amplifier.filtering.trimming import measure_usage
from gmid.amplifier.plan import AmplifierPlan, Choices, Matching, Requirement, Supply
from gmid.amplifier.predicting import predict_each
from gmid.amplifier.prediction import Prediction
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.errors import NoSolution
from gmid.filters.demand import demands_of
from gmid.filters.demand_types import FilterDemands
from gmid.filters.elements import AmplifierModel
from gmid.filters.passives import Passives
from gmid.filters.realisation import Realisation
from gmid.filters.spec import FilterSpec, Tolerance

Opened = tuple[tuple[Condition, Mapping[str, Device]], ...]
Progress = Callable[[float, str], None]
Finder = Callable[..., Any]
"""Sizes one amplifier; called as `gmid.amplifier.search.find_plan`, its result has its fields."""

LEAST_SHARE = 0.8
"""Transconductance of a gm-c amplifier in its worst condition over the nominal one, before it is
known [-]; common practice."""

ROUNDS = 4
"""Rounds of the loop at most."""

RESERVE = 1.03
"""By which amplifiers are sized beyond a round's demands, so that the next does not undo them."""

_SETTLED = 0.01
_NEAR = 0.06
_QUIET = 0.85
_ROUNDED = 0.999  # of a transconductance that the elements are then fitted to
_DECIBELS = ("dc_gain", "intrinsic_gain", "common_mode_gain")
_LEAST = ("input_noise", "common_mode_gain")
_POLE_RESERVE = 1.02
_LARGEST_GROWTH = 1.3
_SQUEEZE = 0.97
_ENOUGH = 0.99
_TRIMS = (1.0, 0.8, 1.25)
_TIGHT = ("gm_total", "excess_pole", "output_current")


@dataclass
class Loop:
    """The rounds of `size_filter`, whose arguments it takes.

    Parameters
    ----------
    spec, tolerance, passives
        The filter, how far it may be off, and what its elements are like.
    bench, roles, own_well
        Conditions with their devices, devices by role, those with a well of their own.
    supply, choices, matching
        As `size_filter` takes them.
    say, find : callable
        Progress, and what sizes one amplifier.

    Examples
    --------
    >>> Loop.__dataclass_fields__["find"].name
    'find'
    """

    spec: FilterSpec
    tolerance: Tolerance
    passives: Passives
    bench: Opened
    roles: dict[str, str]
    own_well: tuple[str, ...]
    supply: Supply
    choices: Choices
    matching: Mapping[str, Matching]
    say: Progress
    find: Finder

    def __post_init__(self) -> None:
        self.hottest = max(condition.temperature for condition, _ in self.bench)
        self.pole = estimate_pole(list(self.bench), self.roles, self.supply)
        self.noise_factor = self._guess_noise()
        self.efficiency = Efficiency(overhead=OVERHEAD * self.supply.reference_current)
        self.split: str | dict[str, float] = "alike"
        self.built = 0.0
        self.squeeze = 1.0
        self.least_share = LEAST_SHARE if self.spec.style == "gm-c" else 1.0
        self.multiples: dict[str, int] | None = None
        self.notes: list[str] = []
        self.found: FilterDemands
        self.grouping: Grouping

    def _guess_noise(self) -> float:
        """Guess the noise factor of amplifiers that are not known yet."""
        if self.spec.noise_band is None:
            return WHITE_NOISE_FACTOR
        frequency = find_noise_frequency(self.spec.noise_band)
        return estimate_noise_factor(self.bench[0][1], self.roles, self.supply, frequency)

    def run(self) -> FilterSizing:
        """Go round until nothing moves and the real filter keeps its tolerance."""
        self._begin()
        sized: Sized | None = None
        k = 0
        while True:
            k += 1
            if sized is None or not self._serves(sized):
                if sized is not None and not self._is_worth_another(sized):
                    break
                self.say(k / (ROUNDS + 2), f"round {k}: an amplifier")
                sized = self._size()
            level = self._level(sized, first=k == 1)
            before = self.found.realisation.capacitor
            moved = abs(level.capacitor / before - 1.0)
            self.say((k + 0.6) / (ROUNDS + 2), f"round {k}: demands with its own capacitances")
            sized = self._feed_back(sized, level)
            if moved >= _SETTLED or not self._serves(sized):
                if k == ROUNDS:
                    break
                # at a lower level a smaller amplifier does
                sized = None if level.capacitor < (1 - _SETTLED) * before else sized
                continue
            used, sized = self._trim(sized)
            if used <= 1.0 or k >= ROUNDS or not np.isfinite(used):
                break
            # amplifiers as demanded do not keep it: those of a tighter tolerance will
            self.squeeze *= _SQUEEZE / used
            self.say((k + 0.9) / (ROUNDS + 2), f"round {k}: {100 * used:.4g} % of the tolerance")
            self._demand(self.found.realisation, self._own(sized))
        assert sized is not None, "only a further round starts without an amplifier"
        return self._finish(sized, k)

    def _is_worth_another(self, sized: Sized) -> bool:
        """Tell whether a search may find more than the last one: not where that missed as much."""
        if sized.met:
            return True
        eased = False
        for name, one in self._asked().items():
            before = sized.asked[name]
            change = (one.value - before) / (1.0 if name in _DECIBELS else max(before, 1e-30))
            harder = -change if name in _LEAST else change
            if harder > _NEAR:
                return False
            eased = eased or harder < -_NEAR
        return eased

    def _trim(self, sized: Sized) -> tuple[float, Sized]:
        """Use spare noise and other output capacitances where the tolerance is broken."""
        used = self._measure(sized)
        if used <= 1.0 or self.spec.style == "gm-c":
            return used, sized
        before = (self.found, self.grouping, self.built)
        spare = level_filter(
            self.found, self._place(sized), self.bench, self.supply, keep_amplifiers=True
        )
        for level in dict.fromkeys((spare, before[0].realisation)):
            for factor in _TRIMS:
                tried = self._resize(sized, before[2] * factor)
                self._demand(level, self._own(tried))
                better = self._measure(tried)
                if better <= _ENOUGH and self._serves(tried):
                    return better, tried
        self.found, self.grouping, self.built = before
        return used, sized

    def _measure(self, sized: Sized) -> float:
        return measure_usage(
            self.found, self._place(sized), self.bench, self.supply, tolerance=self.tolerance
        )

    def _level(self, sized: Sized, *, first: bool) -> Realisation:
        """Set the impedance level by the noise, in gm-c by the transconductance that is there."""
        plans = self._place(sized)
        if self.spec.style != "gm-c":
            lower = first and self._is_quiet(sized)
            return level_filter(self.found, plans, self.bench, self.supply, lower=lower)
        nominal = sized.at_nominal
        unit = float(np.asarray(nominal.gm_total))
        self.least_share = _ROUNDED * float(np.min(np.asarray(sized.model.gm_total))) / unit
        models = {name: nominal.scaled(m) for name, m in self.grouping.multiples.items()}
        made = fit_elements(self.found.realisation, self.grouping.multiples, unit, models=models)
        if self.spec.snr_db is None or self.spec.capacitor is not None:
            return made
        there = replace(self.found, realisation=made)
        grown = level_filter(there, plans, self.bench, self.supply).capacitor / made.capacitor
        if grown <= 1.0:
            return made
        return fit_elements(made, self.grouping.multiples, unit * grown, models=models)

    def _is_quiet(self, sized: Sized) -> bool:
        """Tell whether the amplifier makes much less noise than it may, for other reasons."""
        wanted = self.grouping.demands.get("input_noise")
        if wanted is None or wanted.at is None:
            return False
        noise = max(float(p.noise([wanted.at]).input_density.max()) for p in sized.predictions)
        return noise < _QUIET * wanted.value

    def _feed_back(self, sized: Sized, level: Realisation) -> Sized:
        """Find the demands with what the amplifier brings along.

        Where they ask for a faster excess-phase pole than it has, more is built in at its outputs.
        """
        self._demand(level, self._own(sized))
        if self.spec.style == "gm-c":
            return sized
        slowest = float(np.min(np.asarray(sized.model.excess_pole)))
        wanted = self.grouping.demands["excess_pole"].value
        if wanted > slowest:
            outputs, _ = sized.largest_capacitances
            more = outputs * min(wanted / slowest * _POLE_RESERVE, _LARGEST_GROWTH) - outputs
            sized = self._resize(sized, self.built + more)
            self._demand(level, self._own(sized))
        return sized

    def _begin(self) -> None:
        """Find first demands, choose what is built in at the outputs, and how positions differ."""
        self.say(0.02, "demands of the filter")
        if self.spec.style == "gm-c":
            self._demand(None, None)
            made = self.found.realisation
            self.multiples = choose_multiples(made)
            unit = find_unit(made, self.multiples)
            self._demand(fit_elements(made, self.multiples, unit), None)
            return
        guess = (self.spec.capacitor or 4e-12) * BUILT_SHARES[1]
        self._demand(None, AmplifierModel(output_capacitance=guess))
        self.guessed = max(one["gm_total"].value for one in self.found.demands) / (
            2 * np.pi * self.pole
        )
        made = self.found.realisation
        tried = []
        for share in BUILT_SHARES:
            built = share * made.capacitor
            try:
                self._demand(made, self._guess(built))
            except NoSolution:  # too slow a loop for this tolerance: less is tried besides
                continue
            tried.append((self._price(), built, self.found, self.grouping))
        if not tried:
            self._demand(made, None)
            tried = [(self._price(), 0.0, self.found, self.grouping)]
        _, self.built, kept, alike = min(tried, key=lambda entry: entry[:2])
        self.say(0.06, "demands, each amplifier by itself")
        self.split = "each"
        self._demand(made, self._guess(self.built))
        each = group_positions(self.found, efficiency=self.efficiency)
        if each.cost >= alike.cost * 0.95:
            self.found, self.grouping, self.multiples = kept, alike, alike.multiples
            self.split = "alike"
        else:
            self.multiples = each.multiples
            self.split = {name: float(m) for name, m in each.multiples.items()}
            self.built /= float(np.mean(list(each.multiples.values())))
            self._demand(made, {
                name: self._guess(self.built * m) for name, m in each.multiples.items()
            })  # fmt: skip
        self.notes.append(describe_grouping(alike if self.split == "alike" else each, alike))

    def _guess(self, built: float) -> AmplifierModel:
        """Guess what an amplifier brings along besides what is built in at its outputs."""
        return AmplifierModel(
            output_capacitance=built + OWN_SHARES[0] * self.guessed,
            input_capacitance=OWN_SHARES[1] * self.guessed,
        )

    def _price(self) -> float:
        """Weigh the current for gm_total against what a fast excess-phase pole costs."""
        return self.grouping.cost * (1 + self.grouping.demands["excess_pole"].value / self.pole)

    def _demand(
        self, realisation: Realisation | None,
        own: AmplifierModel | Mapping[str, AmplifierModel] | None,
    ) -> None:  # fmt: skip
        tightened = replace(self.tolerance, passband_db=self.tolerance.passband_db * self.squeeze)
        self.found = demands_of(
            self.spec, tightened, self.passives, realisation=realisation, own=own,
            split=self.split, noise_factor=self.noise_factor, temperature=self.hottest,
            phase_margin=self.choices.loop_phase_margin,
        )  # fmt: skip
        self.grouping = (
            group_positions(self.found, alike=True, efficiency=self.efficiency)
            if self.multiples is None
            else regroup(self.found, self.multiples, least_share=self.least_share)
        )

    def _size(self) -> Sized:
        built = self.built
        wanted = {
            name: replace(one, value=one.value * (RESERVE if name in _TIGHT else 1.0))
            for name, one in self._asked().items()
        }
        result = self.find(
            wanted, load_capacitance=self.grouping.load_capacitance + built,
            load_resistance=self._search_load, bench=self.bench, roles=self.roles,
            own_well=self.own_well, supply=self.supply, choices=self.choices,
            matching=self.matching,
        )  # fmt: skip
        asked = {name: one.value for name, one in self._asked().items()}
        first = Sized(result.plan, (), result.suggestion, result.floor, asked, result.met)
        return self._resize(first, built)

    @property
    def _search_load(self) -> float:
        """Load of an amplifier alone; in gm-c loads are other transconductors [ohm]."""
        return float("inf") if self.spec.style == "gm-c" else self.grouping.load_resistance

    def _asked(self) -> dict[str, Requirement]:
        """Ask for the intrinsic gain too: loaded, much gm_total would hide a lossy output."""
        gain = 20 * np.log10(max(one["intrinsic_gain"].value for one in self.found.demands))
        return {**self.grouping.demands, "intrinsic_gain": Requirement(float(gain))}

    def _resize(self, sized: Sized, built: float) -> Sized:
        """Take another output capacitance, which during a search is part of the load."""
        self.built = built
        base = replace(
            sized.base, load_capacitance=self.grouping.load_capacitance,
            load_resistance=self.grouping.load_resistance, output_capacitance=built,
        )  # fmt: skip
        return replace(sized, base=base, predictions=self._predict(base))

    def _predict(self, plan: AmplifierPlan) -> tuple[Prediction, ...]:
        return predict_each(plan, self.bench, self.supply)

    def _serves(self, sized: Sized) -> bool:
        """Tell whether the amplifier at hand meets this round's demands at every position."""
        if self.spec.style == "gm-c":
            unit = find_unit(self.found.realisation, self.grouping.multiples)
            if abs(float(np.asarray(sized.at_nominal.gm_total)) / unit - 1.0) > _SETTLED:
                return False
        alone = replace(
            sized.base, load_capacitance=self.grouping.load_capacitance,
            load_resistance=self._search_load, demands=self._asked(),
        )  # fmt: skip
        checks = judge(self._predict(alone), self.choices, matching=self.matching)
        return all(check.met for check in checks)

    def _place(self, sized: Sized) -> tuple[AmplifierPlan, ...]:
        return make_plans(sized.base, self.grouping, self.found)

    def _own(self, sized: Sized) -> dict[str, AmplifierModel]:
        """Give what the amplifier brings along at each position, largest of all conditions."""
        outputs, inputs = sized.largest_capacitances
        return {
            name: AmplifierModel(output_capacitance=outputs * m, input_capacitance=inputs * m)
            for name, m in self.grouping.multiples.items()
        }

    def _finish(self, sized: Sized, rounds: int) -> FilterSizing:
        self.say(0.95, "the whole filter in every condition")
        if self.squeeze != 1.0:
            self.notes.append(
                f"The amplifiers were sized for {100 * self.squeeze:.3g} % of the passband "
                "tolerance: real excess phase is not one pole."
            )
            self.squeeze = 1.0
            self._demand(self.found.realisation, self._own(sized))
        plans = self._place(sized)
        predictions = tuple(map(self._predict, plans))
        checks = tuple(judge(one, self.choices, matching=self.matching) for one in predictions)
        review = review_filter(self.found, plans, self.bench, self.supply)
        self.say(1.0, "done")
        return FilterSizing(
            self.found, plans, predictions, checks, review, rounds, tuple(self.notes),
            sized.suggestion, sized.floor * sum(self.grouping.multiples.values()),
        )  # fmt: skip
