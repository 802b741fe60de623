"""The rounds between a filter and its amplifiers.

Rounds find demands, size an amplifier where that at hand misses them, and read what it brings
along, until nothing moves and the real filter keeps its tolerance.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from gmid.amplifier.checks import judge
from gmid.amplifier.filtering.grouping import make_plans
from gmid.amplifier.filtering.levelling import level_filter
from gmid.amplifier.filtering.loop import SETTLED, Loop
from gmid.amplifier.filtering.positions import place_plans
from gmid.amplifier.filtering.realised import RealisedFilter, realise_everywhere
from gmid.amplifier.filtering.result import FilterSizing
from gmid.amplifier.filtering.reviewing import review_filter
from gmid.amplifier.filtering.sized import Sized
from gmid.amplifier.filtering.transconductors import fit_elements
from gmid.amplifier.filtering.trimming import measure_usage
from gmid.amplifier.plan import AmplifierPlan
from gmid.device.device import Device
from gmid.errors import NoSolution
from gmid.filters.elements import AmplifierModel
from gmid.filters.realisation import Realisation

Solved = tuple[tuple[RealisedFilter, Mapping[str, Device]], ...]
"""A filter in every condition, and the devices of each."""

ROUNDS = 4
"""Rounds of the loop at most."""

_OVERSIZE = 1.25
_NEAR = 0.06
_QUIET = 0.85
_SAVED = 0.06  # of an amplifier's current, what a lower level has to save
_FIXED = 4.0  # current of bias and common-mode loop that stays, over the reference current
_ROUNDED = 0.999  # of a transconductance that the elements are then fitted to
_DECIBELS = ("dc_gain", "intrinsic_gain", "common_mode_gain")
_LEAST = ("input_noise", "common_mode_gain")
_POLE_RESERVE = 1.02
_LARGEST_GROWTH = 1.3
_GROWTHS = 3
_SQUEEZE = 0.97
_ENOUGH = 0.99
_TRIMS = (1.0, 0.8, 1.25)


@dataclass(frozen=True)
class _Kept:
    """An amplifier that met its demands at a level that was then lowered."""

    level: Realisation
    sized: Sized
    outputs: tuple[float, float]


class Rounds(Loop):
    """Rounds of `size_filter`, whose arguments it takes.

    Examples
    --------
    >>> issubclass(Rounds, Loop)
    True
    """

    def __post_init__(self) -> None:
        super().__post_init__()
        self._solved: tuple[Realisation, Sized, Solved] | None = None

    def run(self) -> FilterSizing:
        """Go round until nothing moves and the real filter keeps its tolerance."""
        self._begin()
        sized: Sized | None = None
        kept: _Kept | None = None
        shrunk = False
        k = 0
        while True:
            k += 1
            level: Realisation | None = None
            if sized is None or not self._serves(sized):
                is_idle = sized is not None and not self._is_worth_another(sized)
                if is_idle and kept is None:
                    break
                found = None if is_idle else self._search(k)
                if found is not None and (kept is None or _is_better(found, kept.sized)):
                    sized = found
                else:
                    assert kept is not None, "without one the round has ended"
                    sized, level, kept = kept.sized, self._return(kept), None
            here = _Kept(self.found.realisation, sized, (self.built, self.target))
            moved = 0.0
            if level is None:
                level = self._level(sized, first=k == 1)
                moved = level.capacitor / here.level.capacitor - 1.0
            self.say((k + 0.6) / (ROUNDS + 2), f"round {k}: demands with its own capacitances")
            sized = self._feed_back(sized, level)
            if abs(moved) >= SETTLED or not self._serves(sized):
                if k >= ROUNDS or self.ease < 1.0:
                    if kept is None:
                        break
                    sized = self._feed_back(kept.sized, self._return(kept))
                elif moved <= -SETTLED and sized.met:
                    # at a lower level a smaller amplifier does, as a rule
                    kept, sized = here, None
                    continue
                else:
                    continue
            elif kept is None and not shrunk and k < ROUNDS and self._is_oversized(sized):
                # with its own capacitances the filter asks for much less than with those guessed
                shrunk, kept = True, _Kept(level, sized, (self.built, self.target))
                sized = None
                continue
            kept = None
            used, sized = self._trim(sized)
            if used <= 1.0 or k >= ROUNDS or not np.isfinite(used):
                break
            # amplifiers as demanded do not keep it: those of a tighter tolerance will
            self.squeeze *= _SQUEEZE / used
            self.say((k + 0.9) / (ROUNDS + 2), f"round {k}: {100 * used:.4g} % of the tolerance")
            self._demand(self.found.realisation, self._own(sized))
        assert sized is not None, "only a further round starts without an amplifier"
        return self._finish(sized, k)

    def _search(self, k: int) -> Sized:
        self.say(k / (ROUNDS + 2), f"round {k}: an amplifier")
        return self._size_linear() if self.spec.style == "gm-c" else self._size()

    def _is_oversized(self, sized: Sized) -> bool:
        """Tell whether an amplifier has much more speed than its filter asks for."""
        asked = self.grouping.demands
        return (
            self.spec.style != "gm-c"
            and not self.obstacle
            and all(
                float(np.min(np.asarray(getattr(sized.model, name))))
                > _OVERSIZE * asked[name].value
                for name in ("gm_total", "excess_pole")
            )
        )

    def _return(self, kept: _Kept) -> Realisation:
        """Go back to the level of an amplifier that was kept."""
        self.built, self.target = kept.outputs
        return kept.level

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

    def _place(self, sized: Sized) -> tuple[AmplifierPlan, ...]:
        return make_plans(sized.base, self.grouping, self.found)

    def _own(self, sized: Sized) -> dict[str, AmplifierModel]:
        """Give what the amplifier brings along at each position, largest of all conditions."""
        outputs, inputs = sized.largest_capacitances
        return {
            name: AmplifierModel(output_capacitance=outputs * m, input_capacitance=inputs * m)
            for name, m in self.grouping.multiples.items()
        }

    def _measure(self, sized: Sized) -> float:
        cases = self._realise(sized)
        return measure_usage(self.found, [case for case, _ in cases], tolerance=self.tolerance)

    def _realise(self, sized: Sized) -> Solved:
        """Solve the whole filter in every condition; the last one is remembered."""
        made = self.found.realisation
        last = self._solved
        if last is None or last[0] is not made or last[1] is not sized:
            plans = place_plans(self._place(sized), made)
            cases = tuple(realise_everywhere(made, plans, self.bench, self.supply))
            last = self._solved = (made, sized, cases)
        return last[2]

    def _level(self, sized: Sized, *, first: bool) -> Realisation:
        """Set the impedance level by the noise, in gm-c by the transconductance that is there."""
        plans = self._place(sized)
        if self.spec.style != "gm-c":
            lower = first and not self.obstacle and self._is_quiet(sized)
            level = level_filter(self.found, plans, self.bench, self.supply, lower=lower)
            return level if self._is_worth_moving(sized, level) else self.found.realisation
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

    def _is_worth_moving(self, sized: Sized, level: Realisation) -> bool:
        """Tell whether a level is higher, or so low that its smaller amplifiers save something.

        What bias and common-mode loop draw stays.
        """
        fall = 1.0 - level.capacitor / self.found.realisation.capacitor
        saved = fall * (sized.supply_current - _FIXED * self.supply.reference_current)
        return fall <= 0 or saved > _SAVED * sized.supply_current

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
        slowest, weakest = (
            float(np.min(np.asarray(getattr(sized.model, name))))
            for name in ("excess_pole", "gm_total")
        )
        for _ in range(_GROWTHS):
            asked = self.grouping.demands
            wanted = asked["excess_pole"].value
            if wanted <= slowest or asked["gm_total"].value > weakest:
                break
            outputs, _ = sized.largest_capacitances
            self.target = outputs * min(wanted / slowest * _POLE_RESERVE, _LARGEST_GROWTH)
            sized = self._resize(sized, self.built + self.target - outputs)
            self._demand(level, self._own(sized))
        if not self._serves(sized):
            self._demand_for_gain(sized, level)
        return sized

    def _demand_for_gain(self, sized: Sized, level: Realisation) -> None:
        """Find the demands for the gain that the amplifier has, and keep them if it serves."""
        before = self.found, self.grouping
        model = sized.model
        gain = float(np.min(np.asarray(model.gm_total) / np.asarray(model.output_conductance)))
        try:
            self._demand(level, self._own(sized), gain=_ROUNDED * gain)
        except NoSolution:  # it has too little
            return
        if not self._serves(sized):
            self.found, self.grouping = before

    def _finish(self, sized: Sized, rounds: int) -> FilterSizing:
        self.say(0.95, "the whole filter in every condition")
        if self.squeeze != 1.0:
            self.notes.append(
                f"The amplifiers were sized for {100 * self.squeeze:.3g} % of the passband "
                "tolerance: real excess phase is not one pole."
            )
        if self.squeeze != 1.0 or self.spec is not self.asked:
            self.squeeze, self.spec = 1.0, self.asked
            self._demand(self.found.realisation, self._own(sized))
        plans = self._place(sized)
        predictions = tuple(map(self._predict, plans))
        checks = tuple(judge(one, self.choices, matching=self.matching) for one in predictions)
        review = review_filter(
            self.found, plans, self.bench, self.supply, cases=self._realise(sized)
        )
        self.say(1.0, "done")
        return FilterSizing(
            self.found, plans, predictions, checks, review, rounds, tuple(self.notes),
            self.obstacle or sized.suggestion, sized.floor * sum(self.grouping.multiples.values()),
        )  # fmt: skip


def _is_better(new: Sized, old: Sized) -> bool:
    """Tell whether an amplifier is to replace one that met its demands."""
    return new.met and new.supply_current < old.supply_current
