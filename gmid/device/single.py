"""A single bias point in plain numbers: what a loop over points asks, again and again."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any
from weakref import ref

import numpy as np

from gmid.device.aligned import LOGARITHMIC
from gmid.device.capacitance import find_capacitances
from gmid.device.collapsed import Collapsed
from gmid.device.interpolant import Interpolant
from gmid.device.operating_point import Compute, OperatingPoint
from gmid.device.quantities import derive_answer, list_needs
from gmid.device.restoring import ON_CURRENT
from gmid.device.spline import Array

_PLANS = 64
"""Choices of fields whose plans are kept."""


@dataclass(frozen=True, eq=False)
class Plan:
    """How some fields follow from splines; `make_plan` makes it once for each choice of fields.

    Parameters
    ----------
    columns : tuple of str
        Transformed quantities; the current first and that at vds = 0 last, where they are
        needed.
    has_current, has_rest : bool
        Whether those are there.
    ratios, flicker, logarithms : tuple of int
        Which columns are relative to the current, to its square, and logarithms.
    gm : int
        Which of them is gm, 0 where it is not needed.
    derived : tuple of str
        Fields that follow from stored ones.
    sums : tuple of (str, tuple of (int, float))
        Capacitances that follow from stored ones: which columns, and their weights.

    Examples
    --------
    >>> make_plan(("gm", "cgg"), frozenset({"id", "gm", "cgg"}), has_rest=True).columns
    ('id', 'gm', 'cgg', 'rest')
    """

    columns: tuple[str, ...]
    has_current: bool
    has_rest: bool
    ratios: tuple[int, ...]
    flicker: tuple[int, ...]
    logarithms: tuple[int, ...]
    gm: int
    derived: tuple[str, ...]
    sums: tuple[tuple[str, tuple[tuple[int, float], ...]], ...]

    def restore(self, raw: list[float], vds: float, thermal_voltage: float) -> dict[str, Any]:
        """Turn the columns of one point into stored quantities, and add them up to others.

        Parameters
        ----------
        raw : list of float
            The columns; they are overwritten.
        vds : float
            Drain-source voltage [V].
        thermal_voltage : float
            kT/q [V].

        Returns
        -------
        dict of str to float64
            In SI; with ``gm``, ``gm_over_id`` comes along.

        Examples
        --------
        >>> plan = make_plan(("gds",), frozenset({"gds"}), has_rest=False)
        >>> plan.restore([0.0], 0.0, 0.026)
        {'gds': np.float64(1.0)}
        """
        ratio = raw[self.gm]
        if self.has_current:
            channel = math.exp(raw[0]) * (0.0 - math.expm1(-vds / thermal_voltage))
            total = channel + raw.pop() if self.has_rest else channel
            raw[0] = total
            for place in self.ratios:
                raw[place] *= channel
            for place in self.flicker:
                raw[place] = math.exp(raw[place]) * (channel * channel)
            if self.has_rest and total > 0:
                ratio *= channel / total
        for place in self.logarithms:
            raw[place] = math.exp(raw[place])
        found = dict(zip(self.columns, map(np.float64, raw), strict=False))
        if self.gm:
            found["gm_over_id"] = np.float64(ratio)
        for name, parts in self.sums:
            found[name] = np.float64(sum([weight * raw[place] for place, weight in parts]))
        return found


def make_plan(names: Sequence[str], stored: frozenset[str], *, has_rest: bool) -> Plan:
    """Find out what some fields are made of.

    Parameters
    ----------
    names : sequence of str
        Fields, stored ones or derived.
    stored : frozenset of str
        What the sweep stores.
    has_rest : bool, keyword-only
        Whether any current flows at vds = 0.

    Returns
    -------
    Plan
        How to compute them.

    Examples
    --------
    >>> make_plan(["ft"], frozenset({"id", "gm", "cgg"}), has_rest=False).derived
    ('ft',)
    """
    needs = list_needs(names, stored)
    has_current = "id" in needs or bool(ON_CURRENT.intersection(needs))
    columns = [*(["id"] if has_current else []), *(name for name in needs if name != "id")]
    places = {name: place for place, name in enumerate(columns)}
    derived = [name for name in names if name not in needs and name != "gm_over_id"]
    recipes = find_capacitances(stored)
    rest = has_rest and has_current
    return Plan(
        (*columns, "rest") if rest else tuple(columns),
        has_current,
        rest,
        tuple(places[name] for name in ("gm", "gmb") if name in places),
        tuple(places[name] for name in ("noise_flicker",) if name in places),
        tuple(places[name] for name in columns if name in LOGARITHMIC),
        places.get("gm", 0),
        tuple(name for name in derived if name not in recipes),
        tuple(
            (name, tuple((places[part], weight) for part, weight in recipes[name].items()))
            for name in derived
            if name in recipes
        ),
    )


def _take_bias(point: OperatingPoint) -> tuple[float, float, float, float]:
    return float(point.length), float(point.vgs), float(point.vds), float(point.vsb)


class SinglePoints:
    """Answers single bias points of a device.

    Parameters
    ----------
    interpolant : Interpolant
        Its splines.
    known : tuple of str
        Fields that can be answered.

    Examples
    --------
    >>> from gmid.device.device import Device
    >>> from gmid.device.example import example_sweep
    >>> device = Device(example_sweep())
    >>> single = SinglePoints(device._interpolant, device.fields)
    >>> float(single.at(1e-6, 0.6, 0.9, 0.0, single.compute).id.round(6))
    1e-05
    """

    def __init__(self, interpolant: Interpolant, known: tuple[str, ...]) -> None:
        sweep = interpolant.grid.sweep
        self._interpolant, self._stored = interpolant, frozenset(sweep.values)
        self._unit_width = sweep.unit.width
        self._thermal_voltage = interpolant.grid.condition.thermal_voltage
        axes = (sweep.length, sweep.vgs, sweep.vds, sweep.vsb)
        self._reach = tuple(float(axis[end]) for axis in axes for end in (0, -1))
        self._template = {
            "label": sweep.label, "unit_width": sweep.unit.width, "known": known,
            "count": np.float64(1.0), "_names": frozenset(known),
        }  # fmt: skip
        self._basic = tuple(name for name in ("id", "gm", "gds") if name in self._stored)
        self._together = {*self._basic, "gm_over_id"} if "gm" in self._basic else {*self._basic}
        self._plans: dict[tuple[str, ...], Plan] = {}
        self._last: dict[Plan, tuple[float, ref[Collapsed]]] = {}

    def at(
        self, length: Any, vgs: Any, vds: Any, vsb: Any, compute: Compute
    ) -> OperatingPoint | None:
        """Answer a bias point inside the table.

        Parameters
        ----------
        length, vgs, vds, vsb : float
            Channel length [m] and voltages [V].
        compute : callable
            What the operating point is to compute its fields by.

        Returns
        -------
        OperatingPoint
            None where the point lies outside, if only by rounding.
        """
        l0, l1, g0, g1, d0, d1, b0, b1 = self._reach
        if not (l0 <= length <= l1 and g0 <= vgs <= g1 and d0 <= vds <= d1 and b0 <= vsb <= b1):
            return None
        number = np.float64
        return OperatingPoint.take(
            {
                **self._template, "length": number(length), "vgs": number(vgs),
                "vds": number(vds), "vsb": number(vsb), "compute": compute, "_found": {},
                "_bias": (float(length), float(vgs), float(vds), float(vsb)),
            }
        )  # fmt: skip

    def compute(self, point: OperatingPoint, names: Sequence[str]) -> Mapping[str, Array]:
        """Answer fields of an operating point of shape (), for one unit.

        Parameters
        ----------
        point : OperatingPoint
            Inside the table.
        names : sequence of str
            Fields that can be answered.

        Returns
        -------
        dict of str to float64
            Those fields, and what they are made of; with one of `id gm gds` the others, which
            are most often read next.
        """
        single = len(names) == 1 and names[0] in self._together
        wanted = self._basic if single else tuple(names)
        plan = self._plans.get(wanted) or self._make_plan(wanted)
        held = vars(point)
        length, vgs, vds, vsb = held.get("_bias") or _take_bias(point)
        reader = self._find(plan, length).reader
        spot = held.get("_spot")
        if spot is None:
            spot = held["_spot"] = reader.locate(vgs, vds, vsb)
        found = plan.restore(reader.read(spot).tolist(), vds, self._thermal_voltage)
        for name in plan.derived:
            found[name] = derive_answer(name, found, point.length, self._unit_width, self._stored)
        return found

    def _find(self, plan: Plan, length: float) -> Collapsed:
        """Give the splines of a plan; those of the last point, if the length is the same."""
        last = self._last.get(plan)
        if last is not None and last[0] == length:
            spline = last[1]()
            if spline is not None:
                return spline
        spline = self._interpolant.collapse(plan.columns, np.array([length]))
        self._last[plan] = (length, ref(spline))
        return spline

    def _make_plan(self, names: tuple[str, ...]) -> Plan:
        if len(self._plans) >= _PLANS:
            self._plans.clear()
            self._last.clear()
        plan = make_plan(names, self._stored, has_rest=self._interpolant.grid.has_rest)
        return self._plans.setdefault(names, plan)
