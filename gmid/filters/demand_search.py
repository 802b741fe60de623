"""The least amplifiers of a filter: their plane of reciprocals, searched and then made exact.

u multiplies all 1/gm_total (in gm-c: 1/excess pole), v is 1/intrinsic gain of all. The tolerance
is kept at (u, v) and also with the gain alone infinite, the bandwidth alone infinite, no excess
phase, and one amplifier alone half again better, so that amplifiers better than asked never
break it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np

from gmid.errors import NoSolution
from gmid.filters.demand_family import Family, stack_sets
from gmid.filters.demand_ports import Ports, Reciprocals
from gmid.filters.deviation import Deviation, Yardstick
from gmid.filters.search import Boundary, march_outward, split_error, trace_boundary
from gmid.network.pencil import FloatArray

_LEAST_WEIGHT = 0.02
_WINDOW = (0.9975, 0.9999)
_ROUNDS = 12
_IMPROVEMENTS = 5


def choose_gain(boundary: Boundary, *, cost: float = 0.1) -> float:
    """Choose the intrinsic gain at which bandwidth costs little more than with infinite gain.

    Parameters
    ----------
    boundary : Boundary
        Of the allowed region.
    cost : float
        How much more gm_total than with infinite gain [-].

    Returns
    -------
    float
        v = 1/intrinsic gain, not more than half of what infinite bandwidth allows [-].

    Examples
    --------
    >>> line = Boundary(np.array([1.0, 0.5, 0.0]), np.array([0.0, 0.01, 0.02]), np.ones(3))
    >>> round(1 / choose_gain(line, cost=0.25))
    250
    """
    wanted = boundary.u[0] / (1.0 + cost)
    # the first place, going away from infinite gain
    k = int(np.argmax(boundary.u < wanted))
    (u1, u2), (v1, v2) = boundary.u[k - 1 : k + 1], boundary.v[k - 1 : k + 1]
    place = v1 + (v2 - v1) * (u1 - wanted) / (u1 - u2)
    return float(min(place, 0.5 * boundary.v[-1]))


@dataclass(frozen=True, eq=False)
class Point:
    """A point of the plane of reciprocals and what it uses of the tolerance.

    Parameters
    ----------
    u, v : float
        Coordinates.
    family : Family
        The amplifiers.
    worst : Deviation
        At the robustness corner that uses most.
    corner : str
        Which corner that is.
    nominal : Deviation
        With exactly these amplifiers, worst over the corners of the passive elements.
    dense : float
        Usage on the densest grid [-].

    Examples
    --------
    >>> from gmid.filters.deviation import Allowance
    >>> none = Deviation(*np.zeros(5), Allowance(0.2))
    >>> one = Family(np.ones(1), np.ones(1), False)
    >>> Point(1.0, 0.01, one, none, "as asked", none, 0.99).amplifiers.gain.tolist()
    [0.01]
    """

    u: float
    v: float
    family: Family
    worst: Deviation
    corner: str
    nominal: Deviation
    dense: float

    @property
    def amplifiers(self) -> Reciprocals:
        """The amplifiers, shape (K,)."""
        return self.family.at(np.asarray(self.u), np.asarray(self.v))


class Plane:
    """The plane of reciprocals of one filter.

    Parameters
    ----------
    ports : sequence of Ports
        The passive network, nominal first, then its corners.
    coarse, fine, dense : Yardstick
        For the search, for the exact scale, for the confirmation.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, realise
    >>> from gmid.filters.deviation import Allowance
    >>> from gmid.filters.demand_loads import find_loads
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> sticks = [Yardstick(made.sections[0].response, (1e3, 1e6), Allowance(0.1, "all"), points=n)
    ...           for n in (60, 240, 2000)]
    >>> plane = Plane([Ports(made)], *sticks)
    >>> from gmid.filters.demand_family import make_family
    >>> family = make_family(None, find_loads(made), 60.0)
    >>> best = plane.find_scale(family, 1 / 300.0, 1e3)
    >>> bool(0.97 < best.dense <= 1.0)
    True
    """

    def __init__(
        self, ports: Sequence[Ports], coarse: Yardstick, fine: Yardstick, dense: Yardstick
    ) -> None:
        self.ports = tuple(ports)
        self.coarse, self.fine, self.dense = coarse, fine, dense

    def measure(self, real: Reciprocals) -> FloatArray:
        """Return the usage of sets of amplifiers on the coarse grid.

        Parameters
        ----------
        real : Reciprocals
            Of shape (..., K).

        Returns
        -------
        ndarray of float, shape (...)
            Used part of the tolerance [-].
        """
        return self.coarse.measure(self.ports[0].respond(real, self.coarse.frequency)).usage

    def use(self, family: Family, u: FloatArray, v: FloatArray) -> FloatArray:
        """Return the largest usage over all corners (see `Family.list_corners`).

        Parameters
        ----------
        family : Family
            The amplifiers.
        u, v : ndarray of float, shape (n,)
            Points.

        Returns
        -------
        ndarray of float, shape (n,)
            Used part of the tolerance [-].
        """
        corners = family.list_corners(u, v)
        return np.asarray(self.measure(stack_sets(corners.values())).max(axis=0))

    def split(self, family: Family, guess: float) -> Family:
        """Weight the amplifiers of a family to the least sum of gm_total.

        Parameters
        ----------
        family : Family
            Amplifiers alike.
        guess : float
            A gm_total that will do [S].

        Returns
        -------
        Family
            The weighted one; an amplifier that hardly matters keeps a fiftieth of the largest.
        """
        n = family.gm.size
        start = np.full(n, 1.0 / guess)
        reach = march_outward(lambda u: self.measure(family.alone(u)), start, limit=1e4 / guess)
        cost = 1.0 / np.minimum(reach, 1e4 / guess)
        least = split_error(np.maximum(cost, _LEAST_WEIGHT**2 * cost.max()))
        best = family.weighted(least.max() / least)
        found = min((family, best), key=lambda one: self._find_price(one, guess)[0])
        return self._improve(found, guess)

    def find_reach(self, family: Family, guess: float) -> float:
        """Return the largest u that is allowed with infinite gain, on the coarse grid.

        Parameters
        ----------
        family : Family
            The amplifiers.
        guess : float
            1/u to start from.

        Returns
        -------
        float
            u.
        """
        zero = np.zeros(1)
        return float(march_outward(lambda x: self.use(family, x, zero), np.full(1, 1.0 / guess))[0])

    def _find_price(self, family: Family, guess: float) -> tuple[float, float]:
        """Return the sum of gm_total (or of poles) with infinite gain, and the u there."""
        u = self.find_reach(family, guess)
        return float(np.sum(1.0 / family.lag if family.is_fixed else 1.0 / family.gm)) / u, u

    def _improve(self, family: Family, guess: float) -> Family:
        """Shift error towards amplifiers whose gm is dear, as long as the sum of gm falls."""
        price, u = self._find_price(family, guess)
        step = 1.0 + 0.05 * np.eye(family.gm.size)
        power = 0.5
        for _ in range(_IMPROVEMENTS):
            zero = np.zeros(step.shape[0])
            tried = Family(family.gm * step if not family.is_fixed else family.gm,
                           family.lag * step, family.is_fixed)  # fmt: skip
            slope = self.use(tried, zero + u, zero) - self.use(family, zero + u, zero)
            worth = 1.0 / (family.lag if family.is_fixed else family.gm)
            pull = np.maximum(slope, 0.02 * slope.max()) / worth
            new = family.weighted((pull.mean() / pull) ** power)
            cheaper, place = self._find_price(new, 1.0 / u)
            gain = 1.0 - cheaper / price
            if gain > 0:
                family, price, u = new, cheaper, place
            else:
                power *= 0.5
            if 0 < gain < 0.01:
                break
        return family

    def trace(self, family: Family, guess: float, *, rays: int = 9) -> Boundary:
        """Trace the boundary of the allowed region.

        Parameters
        ----------
        family : Family
            The amplifiers.
        guess : float
            A gm_total that will do [S], in gm-c a pole [rad/s].
        rays : int
            Directions.

        Returns
        -------
        Boundary
            u against v.
        """
        return trace_boundary(
            lambda u, v: self.use(family, u, v), rays=rays, start=(1.0 / guess, 1e-3)
        )

    def find_scale(self, family: Family, v: float, guess: float) -> Point:
        """Find the largest u at a given v, exactly: all corners, tuned, on the fine grid.

        Parameters
        ----------
        family : Family
            The amplifiers.
        v : float
            1/intrinsic gain [-].
        guess : float
            1/u to start from.

        Returns
        -------
        Point
            Confirmed on the dense grid.

        Raises
        ------
        NoSolution
            If the gain alone breaks the tolerance, or the search does not end.
        """
        if float(self.use(family, np.zeros(1), np.full(1, v))[0]) >= 1.0:
            raise NoSolution(
                f"an intrinsic gain of {1 / v:.4g} breaks the tolerance even with infinite "
                "bandwidth.", hint="Ask for more gain, or leave it open.",
            )  # fmt: skip
        there = np.full(1, v)
        u = march_outward(lambda x: self.use(family, x, there), np.full(1, 1.0 / guess))[0]
        low, high = (0.0, self._find_worst(family, 0.0, v)[0]), None
        between, before = 1.0, low
        for _ in range(_ROUNDS):
            fine, corner, worst = self._find_worst(family, u, v)
            used = between * fine
            if _WINDOW[0] <= used <= _WINDOW[1]:
                dense = self._confirm(family, u, v, corner)
                if dense <= 1.0:
                    nominal = self._measure_asked(family, u, v)
                    return Point(float(u), v, family, worst, corner, nominal, dense)
                # what lies between the points of the fine grid
                between, used = between * dense / used, dense
            low, high = ((u, used), high) if used < _WINDOW[1] else (low, (u, used))
            before, u = (u, used), _next((u, used), before, low, high)
        raise NoSolution(
            f"the scale of the amplifiers does not settle: {100 * used:.4g} % of the tolerance at "
            f"1/u = {1 / u:.4g}.", hint="The tolerance may bind at an island; widen it a little.",
        )  # fmt: skip

    def _find_worst(self, family: Family, u: float, v: float) -> tuple[float, str, Deviation]:
        corners = family.list_corners(u, v)
        names = list(corners)
        sets = stack_sets(corners.values())
        found = []
        for ports in self.ports:
            deviation = self.fine.confirm(partial(ports.respond, sets))
            k = int(np.argmax(deviation.usage))
            found.append((float(deviation.usage[k]), names[k], deviation.pick(k)))
        return max(found, key=lambda entry: entry[0])

    def _confirm(self, family: Family, u: float, v: float, corner: str) -> float:
        """Return the usage on the dense grid at the corner that binds."""
        real = family.list_corners(u, v)[corner]
        used = [self.dense.confirm(partial(ports.respond, real)).usage for ports in self.ports]
        return float(np.max(used))

    def _measure_asked(self, family: Family, u: float, v: float) -> Deviation:
        """Measure exactly these amplifiers, at the worst corner of the passive elements."""
        real = family.at(u, v)
        asked = [self.dense.confirm(partial(ports.respond, real)) for ports in self.ports]
        return max(asked, key=lambda entry: float(entry.usage))


def _next(
    last: tuple[float, float], before: tuple[float, float], low: tuple[float, float],
    high: tuple[float, float] | None,
) -> float:  # fmt: skip
    """Choose the next u: by a secant of the last two points, kept inside what is known."""
    target = 0.5 * (_WINDOW[0] + _WINDOW[1])
    (u, used), (u0, used0) = last, before
    slope = (used - used0) / (u - u0) if u != u0 else 0.0
    guess = u + (target - used) / slope if slope > 0 else u * target / used
    if high is None:
        return float(np.clip(guess, 1.0005 * u, 1.4 * u))
    width = high[0] - low[0]
    return float(np.clip(guess, low[0] + 0.03 * width, high[0] - 0.03 * width))
