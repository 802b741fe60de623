"""Steps from one candidate to its neighbours: single ones, and those that belong together."""

from __future__ import annotations

import numpy as np

from gmid.amplifier.search.space import Rows, Space

_SCALED = (
    ("load", "direct", "copy"), ("turn", "opposite", "control"), ("direct", "opposite", "control"),
    ("direct", "opposite", "control", "direct_cascode", "opposite_cascode"),
    ("direct_cascode", "opposite_cascode"), ("load", "copy"), ("copy", "turn"),
    ("bias_reference", "tail"), ("tail", "pair"), ("bias_load", "error_tail", "sense_tail"),
    ("bias_load", "bias_opposite_feed", "error_tail", "sense_tail"),
    ("opposite", "control"), ("control", "error_load"), ("pair", "load", "direct", "copy"),
    ("tail", "pair", "load", "direct", "copy", "turn", "opposite", "control", "direct_cascode",
     "opposite_cascode"),
    ("bias_reference", "tail", "bias_mirror", "bias_direct_feed", "follower_tail"),
)  # fmt: skip
"""Places whose counts are scaled together."""

_FACTORS = (0.5, 2 / 3, 0.8, 0.9, 1.1, 1.25, 1.5, 2.0)

_STEPS = (-4, -2, -1, 1, 2, 4)

_FAR = (-6, -3, 0, 3)
_BYPASS = (0, 2)

_TRADES = (
    ("count.opposite", "count.control"), ("count.direct", "count.control"),
    ("count.bias_mirror", "count.bias_load"), ("error_resistance", "error_capacitance"),
)  # fmt: skip
"""Variables of which one gains a step that the other loses."""


def list_moves(space: Space, row: Rows) -> Rows:
    """List the neighbours of a candidate.

    Parameters
    ----------
    space : Space
        Bounds.
    row : ndarray of int, shape (variables,)
        The candidate.

    Returns
    -------
    ndarray of int, shape (n, variables)
        Each once, the candidate itself left out.

    Examples
    --------
    >>> from gmid.amplifier.search.example import example_space
    >>> moves = list_moves(example_space(), example_space().largest)
    >>> bool((moves <= example_space().largest).all())
    True
    """
    found = [
        *_step_single(space, row), *_scale_together(space, row), *_trade(space, row),
        *_retune(space, row),
    ]  # fmt: skip
    table = np.clip(np.array(found, dtype=np.intp), 0, space.largest)
    _, first = np.unique(table, axis=0, return_index=True)
    table = table[np.sort(first)]
    return np.asarray(table[(table != row).any(axis=1)])


def _step_single(space: Space, row: Rows) -> list[Rows]:
    found = []
    for name in space.names:
        column = space.column[name]
        steps = (-1, 1) if name.startswith("length.") else _STEPS
        for step in steps:
            if -row[column] <= step and (abs(step) == 1 or abs(step) <= row[column] + 2):
                other = row.copy()
                other[column] += step
                found.append(other)
    return found


def _scale_together(space: Space, row: Rows) -> list[Rows]:
    found = []
    for members in _SCALED:
        places = [place for place in members if place in space.places]
        if len(places) < 2:
            continue
        for factor in _FACTORS:
            other = row.copy()
            for place in places:
                name = f"count.{place}"
                allowed = space.values[name]
                wanted = allowed[row[space.column[name]]] * factor
                other[space.column[name]] = int(np.argmin(np.abs(allowed - wanted)))
            found.append(other)
    return found


def _trade(space: Space, row: Rows) -> list[Rows]:
    found = []
    for gains, loses in _TRADES:
        for step in (-1, 1):
            other = row.copy()
            other[space.column[gains]] += step
            other[space.column[loses]] -= step
            found.append(other)
    return found


def _retune(space: Space, row: Rows) -> list[Rows]:
    """Try other compensations of the common-mode loop."""
    found = []
    for far in _FAR:
        for long in _FAR:
            for bypass in _BYPASS:
                other = row.copy()
                other[space.column["error_resistance"]] += far
                other[space.column["error_capacitance"]] += long
                other[space.column["sense_capacitance"]] += bypass
                found.append(other)
    return found
