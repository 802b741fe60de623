"""Combinations of moves, by prediction: what single moves do to margins nearly adds up."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.search.space import Rows

Array = NDArray[np.float64]

WEIGHT = 5.0
"""Cost of a missed margin of 1, where 1 is also a factor e of current."""

_BEAM = 30
_BRANCHES = 12
_DEPTH = 7
_TRIED = 8


@dataclass(frozen=True, eq=False)
class Effects:
    """What the moves from a candidate change.

    Parameters
    ----------
    step : ndarray of int, shape (moves, variables)
        Change of positions.
    change : ndarray, shape (moves, points, goals)
        Of margins.
    gain : ndarray, shape (moves,)
        Of the logarithm of what is minimised.
    """

    step: Rows
    change: Array
    gain: Array


@dataclass(frozen=True, eq=False)
class Trial:
    """A combination of moves, by prediction.

    Parameters
    ----------
    rated, gain : float
        Cost with and without what is missed.
    members : tuple of int
        Moves.
    margins : ndarray, shape (points, goals)
        Predicted.
    taken : ndarray of bool, shape (variables,)
        Variables already moved.
    """

    rated: float
    gain: float
    members: tuple[int, ...]
    margins: Array
    taken: NDArray[np.bool_]


def combine(
    row: Rows, base: Array, effects: Effects, watch: NDArray[np.bool_], largest: Rows
) -> Rows:
    """Predict combinations by adding effects, and give the most promising of each size.

    Parameters
    ----------
    row : ndarray of int, shape (variables,)
        Where the moves begin.
    base : ndarray, shape (points, goals)
        Margins there.
    effects : Effects
        Of the moves.
    watch : ndarray of bool, shape (points, goals)
        What counts.
    largest : ndarray of int, shape (variables,)
        Largest positions.

    Returns
    -------
    ndarray of int, shape (n, variables)
        Candidates, those of one move first.

    Examples
    --------
    >>> effects = Effects(np.eye(2, dtype=int), np.array([[[0.1]], [[0.3]]]), np.array([0.0, 0.0]))
    >>> combine(np.zeros(2, dtype=int), np.array([[-0.35]]), effects, np.array([[True]]),
    ...         np.array([5, 5])).tolist()
    [[0, 1], [1, 0], [1, 1]]
    """
    changed = effects.step != 0
    beam: list[Trial] = [Trial(0.0, 0.0, (), base, np.zeros(row.size, dtype=bool))]
    chosen: list[Trial] = []
    for _ in range(_DEPTH):
        grown: dict[tuple[int, ...], Trial] = {}
        for trial in beam:
            _grow(trial, effects, changed, watch, grown)
        beam = sorted(grown.values(), key=lambda one: (one.rated, one.members))[:_BEAM]
        chosen += beam[:_TRIED]
    rows = [row + effects.step[list(one.members)].sum(axis=0) for one in chosen]
    return np.clip(np.array(rows, dtype=np.intp).reshape(-1, row.size), 0, largest)


def _grow(
    trial: Trial, effects: Effects, changed: NDArray[np.bool_], watch: NDArray[np.bool_],
    grown: dict[tuple[int, ...], Trial],
) -> None:  # fmt: skip
    """Add one more move to a combination, in all the ways that promise most."""
    free = np.flatnonzero(~(changed & trial.taken).any(axis=1))
    if not free.size:
        return
    margins = trial.margins + effects.change[free]
    worst = np.where(watch, margins, np.inf).min(axis=1)
    rated = trial.gain + effects.gain[free] + WEIGHT * np.maximum(-worst, 0.0).sum(axis=-1)
    for k in np.argsort(rated, kind="stable")[:_BRANCHES]:
        one = int(free[k])
        key = tuple(sorted((*trial.members, one)))
        if key not in grown:
            grown[key] = Trial(
                float(rated[k]), trial.gain + float(effects.gain[one]), key, margins[k],
                trial.taken | changed[one],
            )  # fmt: skip
