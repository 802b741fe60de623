"""How many of a base amplifier each position of a filter takes, by estimates of current."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from gmid.filters.demand_types import Demand
from gmid.network.pencil import FloatArray

Counts = tuple[float, tuple[int, ...]]
"""Estimate of the total supply current [A], and the multiple of each position."""

LARGEST_MULTIPLE = 8
"""So many base amplifiers at most make one position's."""

CURRENT_SHARE = 0.4
"""Largest output current over the supply current of a plain amplifier; common practice."""

OVERHEAD = 8.0
"""Current of bias and common-mode loop over the reference current [-]; common practice."""

EFFICIENCY = 8.0
"""gm_total over the supply current of a plain amplifier [1/V]; common practice."""

_WORTH = 0.95  # what costs little more but has fewer and larger amplifiers is taken


@dataclass(frozen=True)
class Efficiency:
    """What an amplifier gives for its supply current.

    Parameters
    ----------
    transconductance : float
        gm_total over supply current [1/V].
    current : float
        Largest output current over supply current [-].
    overhead : float
        What bias and common-mode loop of each unit draw besides [A].

    Examples
    --------
    >>> Efficiency().transconductance
    8.0
    """

    transconductance: float = EFFICIENCY
    current: float = CURRENT_SHARE
    overhead: float = 0.0

    def need(self, demand: Demand) -> float:
        """Estimate the supply current that a demand asks for.

        Parameters
        ----------
        demand : Demand
            Of one position.

        Returns
        -------
        float
            [A].
        """
        need = float(self.need_for(np.asarray(demand["gm_total"].value)))
        if "output_current" in demand.requirements:
            need = max(need, demand["output_current"].value / self.current)
        return need

    def need_for(self, gm: FloatArray) -> FloatArray:
        """Estimate the supply current that transconductances ask for.

        Parameters
        ----------
        gm : ndarray of float, shape (...)
            gm_total [S].

        Returns
        -------
        ndarray of float, shape (...)
            [A].
        """
        return np.asarray(gm / self.transconductance)


def choose_counts(needs: FloatArray, overhead: float, *, alike: bool = False) -> Counts:
    """Choose the multiples of least total current.

    Parameters
    ----------
    needs : ndarray of float, shape (K,)
        Supply current that each position asks for [A].
    overhead : float
        Of each unit besides [A].
    alike : bool
        One amplifier for all.

    Returns
    -------
    cost : float
        Total supply current [A].
    counts : tuple of int
        Multiples.

    Examples
    --------
    >>> choose_counts(np.array([1.0, 3.0]), 0.1)[1]
    (1, 3)
    >>> choose_counts(np.array([1.0, 3.0]), 5.0)[1]
    (1, 1)
    """
    size = needs.size
    choices: list[Counts] = [(float(size * (needs.max() + overhead)), (1,) * size)]
    if not alike:
        # the larger the unit, the fewer transistors and the finer its own counts
        for unit in np.unique(needs[:, None] / np.arange(1, LARGEST_MULTIPLE + 1))[::-1]:
            counts = np.ceil(needs / unit - 1e-9).astype(int)
            if counts.max() <= LARGEST_MULTIPLE:
                cost = float((unit + overhead) * counts.sum())
                choices.append((cost, tuple(int(count) for count in counts)))
    least = min(cost for cost, _ in choices)
    return next(choice for choice in choices if choice[0] * _WORTH <= least)


def describe_counts(chosen: Sequence[int], cost: float, alike: float) -> str:
    """Say what several multiples save.

    Parameters
    ----------
    chosen : sequence of int
        Multiples.
    cost, alike : float
        Current with them, and with one amplifier for all positions [A].

    Returns
    -------
    str
        One sentence.

    Examples
    --------
    >>> describe_counts((1, 1), 1e-4, 1e-4)
    'One amplifier serves all positions: multiples of a smaller one would save nothing.'
    """
    many = sorted(chosen)
    if many[-1] == 1:
        return "One amplifier serves all positions: multiples of a smaller one would save nothing."
    saved = 100 * (1 - cost / alike)
    return (
        f"Multiples {' '.join(str(m) for m in many)} of one base amplifier draw about "
        f"{saved:.0f} % less than one amplifier for all."
    )
