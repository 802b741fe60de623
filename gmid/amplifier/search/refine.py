"""Local search on whole numbers: neighbours are evaluated, and what they do is added up.

Margins are logarithms, so the effects of two moves nearly add. One round evaluates all neighbours
of a candidate exactly, predicts combinations of moves by addition, evaluates the most promising
combinations exactly and goes to the best.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.search.combine import WEIGHT, Effects, combine
from gmid.amplifier.search.evaluation import Evaluator, Outcome, Point
from gmid.amplifier.search.moves import list_moves
from gmid.amplifier.search.space import Rows, Space

Array = NDArray[np.float64]

_NEAR = 0.01
_WATCHED = 0.30
_PASSES = 4
_HOPELESS = -9.9
_TINY = 1e-4


@dataclass(frozen=True, eq=False)
class Candidate:
    """A candidate with its exact evaluation at all points.

    Parameters
    ----------
    row : ndarray of int, shape (variables,)
        Positions in its space.
    cost : float
        ln of what is minimised, plus `WEIGHT` times what is missed.
    missed : float
        Sum over goals of the worst shortfall.
    outcome : Outcome
        At all points.
    """

    row: Rows
    cost: float
    missed: float
    outcome: Outcome


@dataclass(frozen=True, eq=False)
class Study:
    """The neighbourhood of a candidate.

    Parameters
    ----------
    active : list of int
        Points that matter.
    watch : ndarray of bool, shape (active, goals)
        What matters there.
    effects : Effects
        Of the moves.
    first : ndarray of int, shape (few, variables)
        The best neighbours.
    """

    active: list[int]
    watch: NDArray[np.bool_]
    effects: Effects
    first: Rows


def rate(outcome: Outcome, minimise: str) -> Array:
    """Give the cost of candidates.

    Parameters
    ----------
    outcome : Outcome
        At any points.
    minimise : {"current", "area"}
        What is made small.

    Returns
    -------
    ndarray, shape (n,)
        ln of the largest supply current or of the area, plus what is missed; where current
        rules, a hundredth of the area's logarithm decides between equals.

    Examples
    --------
    >>> met = Outcome(np.array([[[0.1]]]), np.array([[1.0]]), np.array([1.0]))
    >>> missed = Outcome(np.array([[[-0.1]]]), np.array([[1.0]]), np.array([1.0]))
    >>> float((rate(missed, "current") - rate(met, "current"))[0])
    0.5
    """
    with np.errstate(divide="ignore"):
        current, area = np.log(outcome.current.max(axis=1)), np.log(outcome.area)
    main = area + 0.01 * current if minimise == "area" else current + 0.01 * area
    return np.asarray(np.where(np.isfinite(main), main, 50.0) + WEIGHT * outcome.violation)


class Refiner:
    """Local search in one form.

    Parameters
    ----------
    evaluator : Evaluator
        Evaluates candidates.
    points : sequence of Point
        All points.
    watch : ndarray of bool, shape (points, goals)
        What counts where.
    minimise : {"current", "area"}
        What is made small.
    """

    def __init__(
        self, evaluator: Evaluator, points: Sequence[Point], watch: NDArray[np.bool_],
        minimise: str,
    ) -> None:  # fmt: skip
        self.evaluator = evaluator
        self.points = tuple(points)
        self.watch = watch
        self.minimise = minimise
        self._lesson = np.zeros(watch.shape, dtype=bool)

    @property
    def lessons(self) -> int:
        """How much there is to watch besides what binds."""
        return int(self._lesson.sum())

    @property
    def lesson(self) -> NDArray[np.bool_]:
        """What there is to watch besides what binds, shape (points, goals)."""
        return self._lesson.copy()

    def recall(self, lesson: NDArray[np.bool_]) -> None:
        """Take over what another refiner at the same points had learnt.

        Parameters
        ----------
        lesson : ndarray of bool, shape (points, goals)
            What to watch besides what binds.
        """
        self._lesson[:] = lesson

    @property
    def space(self) -> Space:
        """What varies."""
        return self.evaluator.space

    def widen(self, points: Sequence[Point], watch: NDArray[np.bool_]) -> Refiner:
        """Give the same search at other points.

        Parameters
        ----------
        points : sequence of Point
            Points.
        watch : ndarray of bool, shape (points, goals)
            What counts where.

        Returns
        -------
        Refiner
            With the same evaluator.
        """
        return Refiner(self.evaluator, points, watch, self.minimise)

    def add_worst(self, wide: Refiner, seen: Candidate) -> Refiner:
        """Take in the points at which a candidate misses something.

        Parameters
        ----------
        wide : Refiner
            At more points.
        seen : Candidate
            Evaluated there.

        Returns
        -------
        Refiner
            At the points of this one and those.
        """
        points, watch = list(self.points), [*self.watch]
        missed = np.where(wide.watch, seen.outcome.margins[0], 0.0).min(axis=1) < 0
        for k in np.flatnonzero(missed):
            point = wide.points[k]
            if point in points:
                at = points.index(point)
                watch[at] = watch[at] | wide.watch[k]
            else:
                points.append(point)
                watch.append(wide.watch[k])
        return self.widen(points, np.array(watch))

    def settle(self, rows: Rows) -> list[Candidate]:
        """Evaluate candidates at all points.

        Parameters
        ----------
        rows : ndarray of int, shape (n, variables)
            Candidates.

        Returns
        -------
        list of Candidate
            In the order given.
        """
        outcome = self.evaluator.evaluate(rows, self.points, self.watch)
        costs, missed = rate(outcome, self.minimise), outcome.violation
        return [
            Candidate(rows[k], float(costs[k]), float(missed[k]), outcome.take(np.array([k])))
            for k in range(len(rows))
        ]

    def improve(self, best: Candidate) -> Candidate:
        """Take one round: neighbours once, combinations of them several times.

        Parameters
        ----------
        best : Candidate
            Where to begin.

        Returns
        -------
        Candidate
            Better, or the same one where no neighbour is.
        """
        return self.exploit(best, self.study(best))

    def study(self, best: Candidate) -> Study:
        """Evaluate the neighbours of a candidate.

        Parameters
        ----------
        best : Candidate
            The candidate.

        Returns
        -------
        Study
            What moves do around it.
        """
        active, watch = self._find_active(best)
        moves = list_moves(self.space, best.row)
        outcome = self.evaluator.evaluate(moves, [self.points[k] for k in active], watch)
        effects = self._measure_effects(best, moves, active, outcome, watch)
        order = np.argsort(rate(outcome, self.minimise), kind="stable")[:3]
        return Study(active, watch, effects, moves[order])

    def exploit(self, best: Candidate, study: Study) -> Candidate:
        """Go to the best combinations of moves, as long as there are better ones.

        Parameters
        ----------
        best : Candidate
            Where to begin.
        study : Study
            Of this candidate, or of one nearby.

        Returns
        -------
        Candidate
            Better at all points, or the same one.
        """
        points = [self.points[k] for k in study.active]
        row, base = best.row, np.where(study.watch, best.outcome.margins[0, study.active], 0.0)
        cost, first, trail = np.inf, study.first, [best.row]
        for _ in range(_PASSES):
            combined = combine(row, base, study.effects, study.watch, self.space.largest)
            tried = _drop_doubles(np.concatenate([first, combined]), row)
            if not len(tried):
                break
            again = self.evaluator.evaluate(tried, points, study.watch)
            rated = rate(again, self.minimise)
            k = int(np.argmin(rated))
            if rated[k] >= cost - _TINY:
                break
            row, cost, first = tried[k], float(rated[k]), first[:0]
            base = np.where(study.watch, again.margins[k], 0.0)
            trail.append(row)
        if len(trail) == 1:
            return best
        found = min(self.settle(np.array(trail[:0:-1])), key=lambda one: one.cost)
        self._remember(found)
        return found if found.cost < best.cost - _TINY else best

    def _remember(self, found: Candidate) -> None:
        """Watch in the next round where a candidate missed a goal most."""
        margins = np.where(self.watch, found.outcome.margins[0], np.inf)
        worst = np.argmin(margins, axis=0)
        for goal in np.flatnonzero(margins.min(axis=0) < 0):
            self._lesson[worst[goal], goal] = True

    def _find_active(self, best: Candidate) -> tuple[list[int], NDArray[np.bool_]]:
        """Find where margins bind: for each goal one point about as bad as its worst.

        As few conditions as will do; what a candidate missed in the last round comes along.
        """
        margins = np.where(self.watch, best.outcome.margins[0], np.inf)
        worst = margins.min(axis=0)
        close = (margins <= worst + _NEAR) & (worst <= _WATCHED)
        close |= self._lesson
        conditions = np.array([point.condition for point in self.points])
        wanted = close.any(axis=0)
        chosen = np.zeros(close.shape, dtype=bool)
        while wanted.any():
            covers = [(close[conditions == k].any(axis=0) & wanted).sum()
                      for k in range(int(conditions.max()) + 1)]  # fmt: skip
            here = conditions == int(np.argmax(covers))
            for goal in np.flatnonzero(close[here].any(axis=0) & wanted):
                at = int(np.argmin(np.where(here, margins[:, goal], np.inf)))
                chosen[at, goal] = True
                wanted[goal] = False
        chosen |= self._lesson
        self._lesson[:] = False
        largest = int(np.argmax(best.outcome.current[0]))
        active = sorted({largest, *np.flatnonzero(chosen.any(axis=1)).tolist()})
        return active, chosen[active]

    def _measure_effects(
        self, best: Candidate, moves: Rows, active: list[int], outcome: Outcome,
        watch: NDArray[np.bool_],
    ) -> Effects:  # fmt: skip
        """Give what each move changes; those that lead out of the tables are left out."""
        now = best.outcome
        before = np.where(watch, now.margins[0, active], 0.0)
        change = np.where(watch, outcome.margins, 0.0) - before
        weight = (0.01, 1.0) if self.minimise == "area" else (1.0, 0.01)
        with np.errstate(invalid="ignore", divide="ignore"):
            gain = weight[0] * np.log(
                outcome.current.max(axis=1) / now.current[0, active].max()
            ) + weight[1] * np.log(outcome.area / now.area[0])
        fine = np.isfinite(gain) & (outcome.margins.min(axis=(1, 2)) > _HOPELESS)
        return Effects(moves[fine] - best.row, change[fine], gain[fine])


def _drop_doubles(rows: Rows, row: Rows) -> Rows:
    """Keep each candidate once, and not the one they come from."""
    if not len(rows):
        return rows
    _, first = np.unique(rows, axis=0, return_index=True)
    kept = rows[np.sort(first)]
    return np.asarray(kept[(kept != row).any(axis=1)])
