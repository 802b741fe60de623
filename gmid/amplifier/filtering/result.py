"""What sizing a filter gives: demands, amplifiers, and the judgement of both."""

from __future__ import annotations

from dataclasses import dataclass

from gmid.amplifier.checks import Check
from gmid.amplifier.filtering.reviewing import FilterReview
from gmid.amplifier.plan import AmplifierPlan
from gmid.amplifier.prediction import Prediction
from gmid.filters.demand_types import FilterDemands


@dataclass(frozen=True, eq=False)
class FilterSizing:
    """A filter with its amplifiers sized.

    Parameters
    ----------
    demands : FilterDemands
        Filter, elements, and what each position asks for, with the amplifiers' own capacitances.
    plans : tuple of AmplifierPlan
        Distinct amplifiers, with positions, multiple and demands.
    predictions : tuple of tuple of Prediction
        Of each plan in every condition.
    amplifier_checks : tuple of tuple of Check
        Of each plan.
    review : FilterReview
        The whole filter with these amplifiers.
    rounds : int
        Rounds that the loop took.
    notes : tuple of str
        What was decided on the way, in sentences.
    suggestion : str
        What would help most where an amplifier misses its demands; empty otherwise.
    floor : float
        Supply current below which no amplifiers of this topology can be, all together [A].

    Examples
    --------
    >>> FilterSizing.__dataclass_fields__["rounds"].name
    'rounds'
    """

    demands: FilterDemands
    plans: tuple[AmplifierPlan, ...]
    predictions: tuple[tuple[Prediction, ...], ...]
    amplifier_checks: tuple[tuple[Check, ...], ...]
    review: FilterReview
    rounds: int
    notes: tuple[str, ...] = ()
    suggestion: str = ""
    floor: float = float("nan")

    @property
    def is_met(self) -> bool:
        """Whether every amplifier and the whole filter meet everything."""
        mine = all(check.met for checks in self.amplifier_checks for check in checks)
        return mine and self.review.is_met

    @property
    def binding(self) -> tuple[str, Check]:
        """The part, ``filter`` or a plan's name, and the check with the least margin."""
        listed = [("filter", check) for check in self.review.checks]
        for plan, checks in zip(self.plans, self.amplifier_checks, strict=True):
            listed += [(plan.name, check) for check in checks]
        return min(listed, key=lambda entry: entry[1].margin)

    @property
    def by_position(self) -> dict[str, AmplifierPlan]:
        """The amplifier of each position."""
        found = {name: plan for plan in self.plans for name in plan.positions}
        return {one.position: found[one.position] for one in self.demands.demands}

    def __repr__(self) -> str:
        verdict = "met" if self.is_met else f"missed: {self.binding[1].name} of {self.binding[0]}"
        many = ", ".join(f"{p.multiple} x at {len(p.positions)}" for p in self.plans)
        return (
            f"FilterSizing({self.plans[0].variant}: {many}; "
            f"{self.review.supply_current * 1e6:.4g} uA, {verdict})"
        )
