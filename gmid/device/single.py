"""A single bias point in plain numbers: what a loop over points asks, again and again."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any
from weakref import ref

import numpy as np

from gmid.device.aligned import AT_REST, LOGARITHMIC
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
        Transformed quantities; the current first, that at vds = 0 and its slope last, where they
        are needed.
    has_current, has_rest, has_rest_gm : bool
        Whether those are there.
    ratios, flicker, logarithms : tuple of int
        Which columns are relative to the current, to its square, and logarithms.
    gm : int
        Which of them is gm, 0 where it is not needed.
    is_stored : bool
        Whether the fields are the columns, in their order.
    derived : tuple of str
        Fields that follow from stored ones.
    sums : tuple of (str, tuple of (int, float))
        Capacitances that follow from stored ones: which columns, and their weights.

    Examples
    --------
    >>> stored = frozenset({"id", "gm", "cgg"})
    >>> make_plan(("gm", "cgg"), stored, has_rest=True, has_rest_gm=False).columns
    ('id', 'gm', 'cgg', 'rest')
    """

    columns: tuple[str, ...]
    has_current: bool
    has_rest: bool
    has_rest_gm: bool
    ratios: tuple[int, ...]
    flicker: tuple[int, ...]
    logarithms: tuple[int, ...]
    gm: int
    is_stored: bool
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
        >>> plan = make_plan(("gds",), frozenset({"gds"}), has_rest=False, has_rest_gm=False)
        >>> plan.restore([0.0], 0.0, 0.026)
        {'gds': np.float64(1.0)}
        """
        ratio = raw[self.gm]
        if self.has_current:
            slope = raw.pop() if self.has_rest_gm else 0.0
            channel = math.exp(raw[0]) * (0.0 - math.expm1(-vds / thermal_voltage))
            total = channel + raw.pop() if self.has_rest else channel
            raw[0] = total
            for place in self.ratios:
                raw[place] *= channel
            for place in self.flicker:
                raw[place] = math.exp(raw[place]) * (channel * channel)
            if self.has_rest_gm:
                raw[self.gm] += slope
            if self.has_rest and total > 0:
                ratio = (ratio * channel + slope) / total
        for place in self.logarithms:
            raw[place] = math.exp(raw[place])
        found = dict(zip(self.columns, map(np.float64, raw), strict=False))
        if self.gm:
            found["gm_over_id"] = np.float64(ratio)
        for name, parts in self.sums:
            found[name] = np.float64(sum([weight * raw[place] for place, weight in parts]))
        return found


def make_plan(
    names: Sequence[str], stored: frozenset[str], *, has_rest: bool, has_rest_gm: bool
) -> Plan:
    """Find out what some fields are made of.

    Parameters
    ----------
    names : sequence of str
        Fields, stored ones or derived.
    stored : frozenset of str
        What the sweep stores.
    has_rest : bool, keyword-only
        Whether any current flows at vds = 0.
    has_rest_gm : bool, keyword-only
        Whether that current follows the gate.

    Returns
    -------
    Plan
        How to compute them.

    Examples
    --------
    >>> stored = frozenset({"id", "gm", "cgg"})
    >>> make_plan(["ft"], stored, has_rest=False, has_rest_gm=False).derived
    ('ft',)
    """
    needs = list_needs(names, stored)
    has_current = "id" in needs or bool(ON_CURRENT.intersection(needs))
    columns = [*(["id"] if has_current else []), *(name for name in needs if name != "id")]
    places = {name: place for place, name in enumerate(columns)}
    derived = [name for name in names if name not in needs and name != "gm_over_id"]
    recipes = find_capacitances(stored)
    rest = has_rest and has_current
    slope = rest and has_rest_gm and "gm" in places
    return Plan(
        (*columns, *AT_REST[: rest + slope]),
        has_current,
        rest,
        slope,
        tuple(places[name] for name in ("gm", "gmb") if name in places),
        tuple(places[name] for name in ("noise_flicker",) if name in places),
        tuple(places[name] for name in columns if name in LOGARITHMIC),
        places.get("gm", 0),
        tuple(names) == tuple(columns),
        tuple(name for name in derived if name not in recipes),
        tuple(
            (name, tuple((places[part], weight) for part, weight in recipes[name].items()))
            for name in derived
            if name in recipes
        ),
    )


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
        self._unit_width, self._known = sweep.unit.width, frozenset(known)
        self._thermal_voltage = interpolant.grid.condition.thermal_voltage
        axes = (sweep.length, sweep.vgs, sweep.vds, sweep.vsb)
        self._reach = tuple(float(axis[end]) for axis in axes for end in (0, -1))
        self._template = {
            "label": sweep.label, "unit_width": sweep.unit.width, "known": known,
            "count": np.float64(1.0),
        }  # fmt: skip
        self._basic = tuple(name for name in ("id", "gm", "gds") if name in self._stored)
        self._together = {*self._basic, "gm_over_id"} if "gm" in self._basic else {*self._basic}
        self._plans: dict[tuple[str, ...], Plan] = {}
        self._alone: dict[str, Plan] = {}
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
                "_single": self, "_bias": (float(length), float(vgs), float(vds), float(vsb)),
            }
        )  # fmt: skip

    def fill(self, held: dict[str, Any], name: str) -> bool:
        """Put a quantity among the attributes of a point of one unit, and what is read next.

        Parameters
        ----------
        held : dict
            The attributes, as `at` made them.
        name : str
            The quantity; with one of `id gm gds gm_over_id` come the others.

        Returns
        -------
        bool
            Whether it is known.
        """
        plan = self._alone.get(name)
        if plan is None:
            if name not in self._known:
                return False
            wanted = self._basic if name in self._together else (name,)
            plan = self._alone[name] = self._take_plan(wanted)
        known = held["_found"]
        if name in known:
            held[name] = known[name]
            return True
        found = self._evaluate(plan, held)
        if known:
            found.update(known)
        known.update(found)
        held.update(found)
        return True

    def read(self, held: dict[str, Any], names: Sequence[str]) -> dict[str, Any] | None:
        """Answer several quantities of a point of one unit of which nothing was read before.

        Parameters
        ----------
        held : dict
            Its attributes, as `at` made them.
        names : sequence of str
            Quantities.

        Returns
        -------
        dict of str to float64
            None where one of them is no quantity.
        """
        key = names if type(names) is tuple else tuple(names)
        plan = self._plans.get(key)
        if plan is None:
            if not self._known.issuperset(key):
                return None
            plan = self._take_plan(key)
        found = held["_found"] = self._evaluate(plan, held)
        if plan.is_stored:
            answer = found.copy()
            answer.pop("gm_over_id", None)
            return answer
        return {name: found[name] for name in key}

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
            Those fields, and what they are made of; with one of `id gm gds gm_over_id` the others.
        """
        held = vars(point)
        if "_bias" not in held:
            bias = (point.length, point.vgs, point.vds, point.vsb)
            held = {"length": point.length, "_bias": tuple(map(float, bias))}
        alone = len(names) == 1 and names[0] in self._together
        return self._evaluate(self._take_plan(self._basic if alone else tuple(names)), held)

    def _evaluate(self, plan: Plan, held: dict[str, Any]) -> dict[str, Any]:
        """Work a plan out."""
        length, vgs, vds, vsb = held["_bias"]
        last = self._last.get(plan)
        spline = last[1]() if last is not None and last[0] == length else None
        if spline is None:
            spline = self._interpolant.collapse(plan.columns, np.array([length]))
            self._last[plan] = (length, ref(spline))
        reader = spline.reader
        spot = held.get("_spot")
        if spot is None:
            spot = held["_spot"] = reader.locate(vgs, vds, vsb)
        found = plan.restore(reader.read(spot).tolist(), vds, self._thermal_voltage)
        for name in plan.derived:
            width, stored = self._unit_width, self._stored
            found[name] = derive_answer(name, found, held["length"], width, stored)
        return found

    def _take_plan(self, names: tuple[str, ...]) -> Plan:
        """Give the plan of some fields, made when they are first asked for."""
        plan = self._plans.get(names)
        if plan is not None:
            return plan
        if len(self._plans) >= _PLANS:
            self._plans.clear()
            self._alone.clear()
            self._last.clear()
        grid = self._interpolant.grid
        plan = make_plan(names, self._stored, has_rest=grid.has_rest, has_rest_gm=grid.has_rest_gm)
        return self._plans.setdefault(names, plan)
