"""Responses of a realised filter at corners of its passive elements, tuned and untuned."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.checks import spell_condition
from gmid.amplifier.filtering.realised import RealisedFilter
from gmid.filters.demand_types import FilterDemands

Array = NDArray[np.float64]

_DECIBEL = 20.0


@dataclass(frozen=True, eq=False)
class Corners:
    """Corners of the passive elements.

    Parameters
    ----------
    rscale, cscale : ndarray, shape (k, ...)
        Of resistors and capacitors; broadcast with the supplies [-].

    Examples
    --------
    >>> Corners(np.ones((1, 1)), np.ones((1, 1))).rscale.shape
    (1, 1)
    """

    rscale: Array
    cscale: Array


@dataclass(frozen=True, eq=False)
class FilterResponse:
    """The realised response in one condition, for a figure.

    Parameters
    ----------
    condition : str
        Corner, temperature and supply, such as ``ss/125/1.62``.
    tuned : bool
        Whether the capacitor bank is set for the right frequency.
    rscale, cscale : float
        Corner of resistors and capacitors; of a tuned one the setting of the bank [-].
    frequency, gain_db : ndarray, shape (nf,)
        [Hz], [dB].
    deviation_db : ndarray, shape (nf,)
        From the ideal response; of a tuned one without the flat gain where that does not count
        [dB].

    Examples
    --------
    >>> FilterResponse("tt/27/1.8", True, 1.0, 1.0, np.ones(2), np.zeros(2), np.zeros(2))
    FilterResponse(tt/27/1.8, tuned, 2 points)
    """

    condition: str
    tuned: bool
    rscale: float
    cscale: float
    frequency: Array
    gain_db: Array
    deviation_db: Array

    def __repr__(self) -> str:
        how = "tuned" if self.tuned else f"untuned, R x {self.rscale:g}, C x {self.cscale:g}"
        return f"FilterResponse({self.condition}, {how}, {self.frequency.size} points)"


def find_corners(found: FilterDemands, case: RealisedFilter) -> tuple[Corners, Corners]:
    """Find the corners that count: those of a tuned filter, and those before tuning.

    Parameters
    ----------
    found : FilterDemands
        With the spreads of its passive elements.
    case : RealisedFilter
        Its transconductances count in gm-c.

    Returns
    -------
    tuned, free : Corners
        The nominal one first.

    Examples
    --------
    >>> find_corners.__name__
    'find_corners'
    """
    passives = found.realisation.passives
    ones = (1,) * case.voltage.ndim
    if found.realisation.style == "gm-c":
        r = np.ones((1, *ones))
        tuned = Corners(r, find_gm_ratio(case)[None])
    else:
        spread = passives.resistor_spread
        r = np.array([1.0, 1.0 - spread, 1.0 + spread] if spread else [1.0]).reshape(-1, *ones)
        tuned = Corners(r, 1.0 / r)
    pairs = [(1.0, 1.0)]
    if passives.resistor_spread or passives.capacitor_spread:
        pairs += [
            (1 + a * passives.resistor_spread, 1 + b * passives.capacitor_spread)
            for a in (-1, 1) for b in (-1, 1)
        ]  # fmt: skip
    free = [np.array(column).reshape(-1, *ones) for column in zip(*pairs, strict=True)]
    return tuned, Corners(*free)


def find_gm_ratio(case: RealisedFilter) -> Array:
    """Give by how much the transconductances of a gm-c filter are off, all alike.

    Parameters
    ----------
    case : RealisedFilter
        The filter.

    Returns
    -------
    ndarray, shape (...)
        Geometric mean over the amplifiers, of the shape of the supplies [-].

    Examples
    --------
    >>> find_gm_ratio.__name__
    'find_gm_ratio'
    """
    from gmid.amplifier.filtering.positions import measure_transconductances

    made = case.realisation
    wanted = np.array([made.find(str(place.element)).value for place in made.amplifiers])
    real = measure_transconductances(case)
    return np.asarray(np.exp(np.mean(np.log(real / wanted), axis=-1)))


def collect_responses(found: FilterDemands, case: RealisedFilter) -> list[FilterResponse]:
    """Collect the responses of one condition at nominal supply.

    Parameters
    ----------
    found : FilterDemands
        Filter and tolerance.
    case : RealisedFilter
        The filter; the middle one of its supplies is shown.

    Returns
    -------
    list of FilterResponse
        The tuned one, then the untuned ones: as drawn, and the slowest and the fastest corner.

    Examples
    --------
    >>> collect_responses.__name__
    'collect_responses'
    """
    stick = found.plane.fine
    f = stick.frequency
    tuned, free = find_corners(found, case)
    middle = case.voltage.size // 2
    one = Corners(tuned.rscale[:1], tuned.cscale[:1])
    shift = stick.measure(case.respond(f, rscale=one.rscale, cscale=one.cscale)).shift
    set_right = Corners(one.rscale, one.cscale * (1.0 + shift))
    product = (free.rscale * free.cscale).reshape(len(free.rscale), -1)[:, 0]
    shown = list(dict.fromkeys([0, int(np.argmax(product)), int(np.argmin(product))]))
    rest = Corners(free.rscale[shown], free.cscale[shown])
    rows = []
    for corners, is_tuned in ((set_right, True), (rest, False)):
        response = case.respond(f, rscale=corners.rscale, cscale=corners.cscale)
        flat = stick.measure(response).gain_db if is_tuned else np.zeros(response.shape[:-1])
        shape = response.shape[:-1]
        r, c = (np.broadcast_to(x, shape).reshape(shape[0], -1)[:, middle]
                for x in (corners.rscale, corners.cscale))  # fmt: skip
        gains = 20 * np.log10(np.abs(response)).reshape(shape[0], -1, f.size)[:, middle]
        aside = flat.reshape(shape[0], -1)[:, middle]
        for k in range(shape[0]):
            rows.append((is_tuned, float(r[k]), float(c[k]), gains[k], float(aside[k])))
    where = spell_condition(case.condition, float(case.voltage.ravel()[middle]))
    order = stick.shown
    with np.errstate(divide="ignore"):
        ideal = _DECIBEL * np.log10(np.abs(stick.ideal(f[order])))
    return [
        FilterResponse(where, is_tuned, r, c, f[order], gain[order], gain[order] - aside - ideal)
        for is_tuned, r, c, gain, aside in rows
    ]  # fmt: skip
