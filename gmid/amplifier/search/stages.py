"""Stages of a search that its forms go through side by side, each in a process of a crew."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.search.dress import dress
from gmid.amplifier.search.evaluation import FAILED, Evaluator, Point
from gmid.amplifier.search.refine import Candidate, rate
from gmid.amplifier.search.sketch import draw_charts
from gmid.amplifier.search.space import Rows, Space
from gmid.amplifier.search.starts import Starts, choose_conditions, find_starts

if TYPE_CHECKING:
    from gmid.amplifier.search.searcher import Searcher

_STARTS = 12
_TELLING = 2
_OUTSIDE = 1e3

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Refined:
    """A form after its first round.

    Parameters
    ----------
    best : Candidate
        The best so far.
    lesson : ndarray of bool, shape (points, goals)
        What its refiner keeps in mind.
    starts : dict
        Node voltages that its evaluator keeps.

    Examples
    --------
    >>> sorted(Refined.__dataclass_fields__)
    ['best', 'lesson', 'starts']
    """

    best: Candidate
    lesson: NDArray[np.bool_]
    starts: dict[Point, dict[str, float]]


def rank_form(search: Searcher, space: Space) -> tuple[Space, Starts]:
    """Apply the closed forms to a form.

    Parameters
    ----------
    search : Searcher
        What is asked.
    space : Space
        The form.

    Returns
    -------
    space : Space
        The same one.
    starts : Starts
        What promises most.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search, example_space
    >>> len(rank_form(example_search(), example_space())[1].cost)
    12
    """
    return space, _find_starts(search, space, ends=1)


def _find_starts(search: Searcher, space: Space, *, ends: int) -> Starts:
    """Apply the closed forms at the low supply, or at both ends of it."""
    task = search.task
    chosen, voltages = choose_conditions(task, space), task.supply.voltages
    places = [(k, voltages[0]) for k in chosen]
    places += [(k, voltages[-1]) for k in chosen[:_TELLING] if ends > 1]
    charts = [
        draw_charts(space, task.book, k, task.supply, float(voltage), task.swing)
        for k, voltage in places
    ]
    return find_starts(task, space, charts, _STARTS)


def try_starts(search: Searcher, form: tuple[Space, Starts]) -> tuple[Rows, float]:
    """Evaluate the starts of a form exactly at a few points.

    Parameters
    ----------
    search : Searcher
        What is asked.
    form : tuple of Space and Starts
        The form.

    Returns
    -------
    row : ndarray of int, shape (variables,)
        The best of them.
    cost : float
        What it rates.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search, example_space
    >>> search = example_search()
    >>> row, cost = try_starts(search, rank_form(search, example_space()))
    >>> row.shape == example_space().largest.shape
    True
    """
    space, starts = form
    rows, rated = _rate_starts(search, space, starts)
    if not np.isfinite(rated).any():
        rows, rated = _rate_starts(search, space, _find_starts(search, space, ends=2))
    return rows[int(np.argmin(rated))], float(min(rated.min(), _OUTSIDE))


def _rate_starts(search: Searcher, space: Space, starts: Starts) -> tuple[Rows, Array]:
    """Rate starts at the low supply; infinite where the high one leads out of the tables."""
    task = search.task
    chosen = choose_conditions(task, space)[:_TELLING]
    rows, evaluator = dress(task, space, starts), Evaluator(space, search.setting)
    low, high = (
        evaluator.evaluate(rows, [Point(k, float(voltage)) for k in chosen])
        for voltage in task.supply.voltages[[0, -1]]
    )
    inside = (high.margins > FAILED).all(axis=(1, 2))
    return rows, np.where(inside, rate(low, search.choices.minimise), np.inf)


def refine_start(search: Searcher, form: tuple[Space, Rows]) -> Refined:
    """Take the first round from the best start of a form.

    Parameters
    ----------
    search : Searcher
        What is asked.
    form : tuple of Space and ndarray of int
        The form and the start.

    Returns
    -------
    Refined
        For another process to go on from.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_search, example_space
    >>> search, space = example_search(), example_space()
    >>> row, _ = try_starts(search, rank_form(search, space))
    >>> refined = refine_start(search, (space, row))
    >>> len(refined.starts) > 0
    True
    """
    space, row = form
    refiner = search.open_refiner(space)
    best = refiner.improve(refiner.settle(row[None])[0])
    return Refined(best, refiner.lesson, dict(refiner.evaluator.starts))
