"""What the rounds between a filter and its amplifiers work with: demands, and one amplifier.

Demands need the amplifiers' own capacitances and noise, amplifiers need the demands. Here stand
both steps: demands with what an amplifier brings along, and an amplifier for the demands.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from contextlib import suppress
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from gmid.amplifier.checks import judge
from gmid.amplifier.filtering.counting import (
    OVERHEAD,
    Efficiency,
    choose_counts,
    describe_counts,
)
from gmid.amplifier.filtering.grouping import (
    Grouping,
    find_noise_frequency,
    group_positions,
    regroup,
)
from gmid.amplifier.filtering.pairs import list_smaller_pairs
from gmid.amplifier.filtering.poles import (
    BUILT_SHARES,
    OWN_SHARES,
    WHITE_NOISE_FACTOR,
    estimate_noise_factor,
    estimate_pole,
)
from gmid.amplifier.filtering.reach import (
    EASED_POLE,
    EASED_SWING,
    describe_speed,
    describe_swing,
    ease_demands,
    find_fastest_pole,
    find_largest_swing,
    weigh_gain,
)
from gmid.amplifier.filtering.sized import Sized
from gmid.amplifier.filtering.transconductors import choose_multiples, find_unit, fit_elements
from gmid.amplifier.plan import AmplifierPlan, Choices, Matching, Requirement, Supply
from gmid.amplifier.predicting import predict_each
from gmid.amplifier.prediction import Prediction
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.errors import NoSolution
from gmid.filters.demand import demands_of
from gmid.filters.demand_filter import Own
from gmid.filters.demand_level import Estimate, estimate_demands
from gmid.filters.demand_types import FilterDemands
from gmid.filters.deviation import MEANINGS
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

RESERVE = 1.03
"""By which amplifiers are sized beyond a round's demands, so that the next does not undo them."""

SETTLED = 0.01
"""Relative change of a level or a transconductance that counts as none [-]."""

_WORTH = 0.95
_SMALL = 0.02
_EXCESS = 0.02
_SEARCHES = 3
_LONGEST_STEP = 2.5
_TIGHT = ("gm_total", "excess_pole", "output_current")


@dataclass
class Loop:
    """Demands and an amplifier, as the rounds of `size_filter` need them; it takes its arguments.

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
        self.asked = self.spec
        self.obstacle = ""
        self.ease = 1.0
        limit = find_largest_swing(self.supply)
        if (self.spec.swing or 0.0) > limit:
            self.obstacle = describe_swing(float(self.spec.swing or 0.0), limit, self.supply)
            self.spec = self.spec.with_values(swing=EASED_SWING * limit)
        self.hottest = max(condition.temperature for condition, _ in self.bench)
        self.pole = estimate_pole(list(self.bench), self.roles, self.supply)
        self.noise_factor = self._guess_noise()
        self.efficiency = Efficiency(overhead=OVERHEAD * self.supply.reference_current)
        self.split: str | dict[str, float] = "alike"
        self.built = 0.0
        self.target = 0.0
        self.squeeze = 1.0
        self.least_share = LEAST_SHARE if self.spec.style == "gm-c" else 1.0
        self.multiples: dict[str, int] | None = None
        self.notes: list[str] = []
        self._judged: tuple[Sized, FilterDemands, bool] | None = None
        self.found: FilterDemands
        self.grouping: Grouping

    def _guess_noise(self) -> float:
        """Guess the noise factor of amplifiers that are not known yet."""
        if self.spec.noise_band is None:
            return WHITE_NOISE_FACTOR
        frequency = find_noise_frequency(self.spec.noise_band)
        return estimate_noise_factor(self.bench[0][1], self.roles, self.supply, frequency)

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
        first = self._estimate(None, AmplifierModel(output_capacitance=guess))
        made = first.realisation
        if self._refuse_speed(first):
            self._set_outputs(guess, 0.0)
            self._demand(made, AmplifierModel(output_capacitance=guess))
            return
        self.guessed = float(first.gm_total.max()) / (2 * np.pi * self.pole)
        tried = []
        for share in BUILT_SHARES:
            built = share * made.capacitor
            try:
                found = self._estimate(made, self._guess(built))
            except NoSolution:  # too slow a loop for this tolerance: less is tried besides
                continue
            tried.append((self._price(found), built, found))
        if not tried:
            raise NoSolution(
                "no amplifier keeps the tolerance with the capacitances that come with it.",
                where="tolerance.passband", hint="Allow more, or ask for a larger capacitor.",
            )  # fmt: skip
        _, built, found = min(tried, key=lambda entry: entry[:2])
        self._choose_multiples(made, built, found)

    def _choose_multiples(self, made: Realisation, built: float, found: Estimate) -> None:
        """Choose how positions differ, and find the demands of that."""
        own = OWN_SHARES[0] * self.guessed
        self.say(0.06, "demands, each amplifier by itself")
        needs = self.efficiency.need_for(found.gm_total)
        alike = choose_counts(needs, self.efficiency.overhead, alike=True)
        self.split = "each"
        each = choose_counts(
            self.efficiency.need_for(self._estimate(made, self._guess(built)).gm_total),
            self.efficiency.overhead,
        )  # fmt: skip
        names = [place.name for place in made.amplifiers]
        cost, counts = each if each[0] < _WORTH * alike[0] else alike
        self.notes.append(describe_counts(counts, cost, alike[0]))
        if max(counts) == 1:
            self.split, self.multiples = "alike", dict.fromkeys(names, 1)
            self._set_outputs(built, own)
            self._demand(made, self._guess(built))
            return
        self.multiples = dict(zip(names, counts, strict=True))
        self.split = {name: float(m) for name, m in self.multiples.items()}
        mean = float(np.mean(counts))
        self._set_outputs(built / mean, own / mean)
        self._demand(made, {
            name: self._guess(built * m / mean) for name, m in self.multiples.items()
        })  # fmt: skip

    def _estimate(self, realisation: Realisation | None, own: Own) -> Estimate:
        return estimate_demands(
            self.spec, self.tolerance, self.passives, realisation=realisation, own=own,
            split=self.split, noise_factor=self.noise_factor, temperature=self.hottest,
            phase_margin=self.choices.loop_phase_margin,
        )  # fmt: skip

    def _set_outputs(self, built: float, own: float) -> None:
        """Set what is built in at the outputs, and what that makes with a guess of their own."""
        self.built, self.target = built, built + own

    def _refuse_speed(self, found: Estimate) -> bool:
        """Tell whether no amplifier can be so fast; those of usual mirrors are then the nearest."""
        wanted = float(found.excess_pole.max())
        fastest = find_fastest_pole(self.bench, self.roles, self.supply)
        if wanted <= fastest:
            return False
        self.ease = EASED_POLE * self.pole / wanted
        self.obstacle = self.obstacle or describe_speed(
            wanted, fastest, self._find_speeds(found.realisation)
        )
        return True

    def _find_speeds(self, made: Realisation) -> dict[str, float]:
        """Find the pole that each meaning of the tolerance with less in it asks for [Hz]."""
        before, found = self.tolerance, {}
        for counts in MEANINGS[MEANINGS.index(before.counts) + 1 :]:
            self.tolerance = replace(before, counts=counts)
            guess = AmplifierModel(output_capacitance=BUILT_SHARES[-1] * made.capacitor)
            found[counts] = float(self._estimate(made, guess).excess_pole.max())
        self.tolerance = before
        return found

    def _guess(self, built: float) -> AmplifierModel:
        """Guess what an amplifier brings along besides what is built in at its outputs."""
        return AmplifierModel(
            output_capacitance=built + OWN_SHARES[0] * self.guessed,
            input_capacitance=OWN_SHARES[1] * self.guessed,
        )

    def _price(self, found: Estimate) -> float:
        """Weigh the current for gm_total against what a fast excess-phase pole costs."""
        current = self.efficiency.need_for(found.gm_total).max() + self.efficiency.overhead
        return float(current * (1 + found.excess_pole.max() / self.pole))

    def _demand(
        self, realisation: Realisation | None, own: Own | None, *, gain: float | None = None,
    ) -> None:  # fmt: skip
        """Find the demands, for an intrinsic gain where one is given.

        Where hardly any bandwidth may be lost for gain, more of it is given for less gain.
        """
        self.found = self._derive(realisation, own, gain)
        for easier in () if gain is not None else weigh_gain(self.found.trade_off):
            with suppress(NoSolution):  # where errors cancel at that gain, at one beside it not
                self.found = self._derive(self.found.realisation, own, easier)
                break
        self.grouping = (
            group_positions(self.found, alike=True, efficiency=self.efficiency)
            if self.multiples is None
            else regroup(self.found, self.multiples, least_share=self.least_share)
        )

    def _derive(
        self, realisation: Realisation | None, own: Own | None, gain: float | None
    ) -> FilterDemands:
        tightened = replace(self.tolerance, passband_db=self.tolerance.passband_db * self.squeeze)
        return demands_of(
            self.spec, tightened, self.passives, realisation=realisation, own=own,
            split=self.split, noise_factor=self.noise_factor, temperature=self.hottest,
            phase_margin=self.choices.loop_phase_margin, intrinsic_gain=gain,
        )  # fmt: skip

    def _size(self, choices: Choices | None = None) -> Sized:
        """Find an amplifier for the demands, and build in at its outputs what its own lack."""
        asked = self._asked()
        wanted = {
            name: replace(one, value=one.value * (RESERVE if name in _TIGHT else 1.0))
            for name, one in asked.items()
        }
        result = self.find(
            wanted, load_capacitance=self.grouping.load_capacitance + self.built,
            load_resistance=self._search_load, bench=self.bench, roles=self.roles,
            own_well=self.own_well, supply=self.supply, choices=choices or self.choices,
            matching=self.matching,
        )  # fmt: skip
        values = {name: one.value for name, one in asked.items()}
        first = Sized(result.plan, (), result.suggestion, result.floor, values, result.met)
        sized = self._resize(first, self.built)
        if self.spec.style == "gm-c":
            return sized
        outputs, _ = sized.largest_capacitances
        lacking = max(self.target - outputs, -self.built)
        return (
            sized if abs(lacking) < _SMALL * outputs else self._resize(sized, self.built + lacking)
        )

    def _size_linear(self) -> Sized:
        """Find a transconductor that stays linear in a filter scaled to what it has.

        A search takes transconductance that costs no current: a pair with less of it may do, else
        a longer one.
        """
        choices = self.choices
        unit = find_unit(self.found.realisation, self.grouping.multiples)
        for _ in range(_SEARCHES):
            sized = self._size(choices)
            excess = float(np.asarray(sized.at_nominal.gm_total)) / unit
            if excess <= 1 + _EXCESS or not sized.met or self._is_linear(sized, excess):
                return sized
            for plan, scale in list_smaller_pairs(
                sized.base, self.bench[0][1], self.supply, self.choices, wanted=unit
            ):
                tried = self._resize(replace(sized, base=plan), self.built)
                if self._is_linear(tried, scale):
                    return tried
            lengths = {**self.choices.smallest_length}
            pair = sized.base.transistors["pair"]
            lengths["pair"] = float(np.asarray(pair.length)) * min(excess**2, _LONGEST_STEP)
            if lengths["pair"] > self.bench[0][1][pair.device].sweep.length[-1]:
                return sized
            choices = replace(
                self.choices, smallest_length=lengths, input_pair=sized.base.input_pair
            )
        return sized

    def _is_linear(self, sized: Sized, scale: float) -> bool:
        """Tell whether an amplifier serves a filter that is scaled to its transconductance."""
        asked = {name: one for name, one in self._asked().items() if name != "gm_total"}
        if "output_current" in asked:
            current = asked["output_current"]
            asked["output_current"] = replace(current, value=current.value * scale)
        return self._meets(sized, asked)

    @property
    def _is_gm_c(self) -> bool:
        return self.spec.style == "gm-c"

    @property
    def _search_load(self) -> float:
        """Load of an amplifier alone; in gm-c loads are other transconductors [ohm]."""
        return float("inf") if self._is_gm_c else self.grouping.load_resistance

    def _asked(self) -> dict[str, Requirement]:
        """Ask for the intrinsic gain too: loaded, much gm_total would hide a lossy output."""
        gain = 20 * np.log10(max(one["intrinsic_gain"].value for one in self.found.demands))
        asked = {**self.grouping.demands, "intrinsic_gain": Requirement(float(gain))}
        return asked if self.ease == 1.0 else ease_demands(asked, self.ease)

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
            if abs(float(np.asarray(sized.at_nominal.gm_total)) / unit - 1.0) > SETTLED:
                return False
        last = self._judged
        if last is None or last[0] is not sized or last[1] is not self.found:
            last = self._judged = (sized, self.found, self._meets(sized, self._asked()))
        return last[2]

    def _meets(self, sized: Sized, demands: Mapping[str, Requirement]) -> bool:
        """Tell whether the amplifier at hand meets demands, with the loads of the bench."""
        here = self.grouping
        loads = (here.load_capacitance, *([here.largest_load] if self._is_gm_c else []))
        alone = replace(sized.base, load_resistance=self._search_load, demands=dict(demands))
        return all(
            check.met
            for load in loads
            for check in judge(
                self._predict(replace(alone, load_capacitance=load)), self.choices,
                matching=self.matching,
            )
        )  # fmt: skip
