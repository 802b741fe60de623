"""A first plan by closed forms: counts from currents, lengths and gm/Id, place by place.

Not optimal, but it works: a start for hand work and for a search. Currents are taken as
mirrored exactly; the prediction says what they really are.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from gmid.amplifier.places import PLACES, Variant, list_places
from gmid.amplifier.plan import AmplifierPlan, Supply, TransistorPlan
from gmid.device.device import Device
from gmid.errors import OutOfReach

_MIRRORS = ("load", "direct", "copy")
_TURNS = ("turn", "opposite", "control", "error_load")
_OTHER_SOURCES = ("bias_load", "error_tail", "sense_tail", "bias_opposite_feed")
_LARGEST_STACK = 4
_FEEDS = (1, 2, 3)
_COUNTS = (1, 2, 3, 4, 6, 8, 12, 16)
_NEAR = 0.015  # [V]

_LEAST = {"load": 2, "turn": 4, "bias_reference": 2, "bias_load": 2}
"""Units that give the ratios of mirrors their steps; lengths grow until there are so many."""


@dataclass(frozen=True)
class Draft:
    """What a first plan is made from.

    Parameters
    ----------
    names : mapping of str to str
        Device by channel, ``n`` and ``p``; `follower` optionally.
    variant : Variant
        Form of the amplifier.
    tail_current : float
        Of the input pair [A].
    load_capacitance : float
        [F].
    load_resistance : float
        [ohm].
    ratio : float
        `direct` over `load` [-].
    control_share : float
        Current of `control` over that of `direct` [-].
    gm_over_id : mapping of str to float
        By group: `pair`, `mirror`, `turn`, `source`, `other` (sources of the other channel),
        `cascode`, `follower` [1/V].
    length : mapping of str to float
        By the same groups [m]; a mirror of too few units becomes longer.
    sense_resistance, sense_capacitance : float
        [ohm], [F].

    Examples
    --------
    >>> Draft({"n": "nmos", "p": "pmos"}, Variant(), 8e-6, 1e-12).ratio
    2.5
    """

    names: Mapping[str, str]
    variant: Variant
    tail_current: float
    load_capacitance: float
    load_resistance: float = np.inf
    ratio: float = 2.5
    control_share: float = 0.2
    gm_over_id: Mapping[str, float] = field(default_factory=dict)
    length: Mapping[str, float] = field(default_factory=dict)
    sense_resistance: float = 500e3
    sense_capacitance: float = 50e-15


GM_OVER_ID = {
    "pair": 16.0, "mirror": 10.0, "turn": 10.0, "source": 10.0, "other": 10.0, "cascode": 14.0,
    "follower": 14.0,
}  # fmt: skip
"""Usual choices [1/V], common practice."""

LENGTH = {
    "pair": 0.4e-6, "mirror": 0.6e-6, "turn": 0.6e-6, "source": 1e-6, "other": 1e-6,
    "cascode": 0.35e-6, "follower": 0.35e-6,
}  # fmt: skip
"""Usual choices for a 180 nm class process [m]."""


def draft_plan(
    draft: Draft, devices: Mapping[str, Device], supply: Supply, *, name: str = "a1"
) -> AmplifierPlan:
    """Make a first plan.

    Parameters
    ----------
    draft : Draft
        What is wanted.
    devices : mapping of str to Device
        Devices of the nominal condition.
    supply : Supply
        Its nominal voltage and reference current count.
    name : str
        Name of the plan.

    Returns
    -------
    AmplifierPlan
        With whole counts.

    Raises
    ------
    OutOfReach
        If a gm/Id or a length is not in the table.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_supply
    >>> wanted = Draft({"n": "nmos", "p": "pmos"}, Variant(), 8e-6, 1e-12,
    ...                length={"pair": 0.5e-6, "mirror": 1e-6, "turn": 1e-6, "source": 1e-6})
    >>> draft_plan(wanted, example_devices(), example_supply()).transistors["direct"]
    TransistorPlan(device='pmos', length=1.39e-06, count=5, stack=1, bulk='rail')
    """
    return _Drafter(draft, devices, supply).make(name)


class _Drafter:
    """The work of `draft_plan`."""

    def __init__(self, draft: Draft, devices: Mapping[str, Device], supply: Supply) -> None:
        self.draft = draft
        self.devices = devices
        self.supply = supply
        self.efficiency = {**GM_OVER_ID, **draft.gm_over_id}
        self.length = {**LENGTH, **draft.length}
        half, current = 0.5 * draft.tail_current, supply.reference_current
        for place, group, flow in (
            ("load", "mirror", half), ("turn", "turn", half),
            ("bias_reference", "source", current), ("bias_load", "other", current),
        ):  # fmt: skip
            self._stretch(place, group, flow)

    def _stretch(self, place: str, group: str, current: float) -> None:
        """Make a group's transistors longer until a place has units enough."""
        longest = float(self.device(place).sweep.length[-1])
        for _ in range(3):
            wanted = _LEAST[place] * self.unit_current(place, group) / current
            self.length[group] = min(self.length[group] * max(1.0, wanted), longest)
        self.length[group] = round(self.length[group], 8)

    def device(self, place: str) -> Device:
        """Give the device of a place."""
        return self.devices[self._name(place)]

    def _name(self, place: str) -> str:
        names = self.draft.names
        if place == "follower" and "follower" in names:
            return names["follower"]
        return names[PLACES[place].polarity(self.draft.variant.input_pair)]

    def unit_current(self, place: str, group: str) -> float:
        """Give the current of one unit at the gm/Id of its group [A]."""
        point = self.device(place).at(
            length=self.length[group], vds=0.3 * self.supply.voltage,
            gm_over_id=self.efficiency[group],
        )  # fmt: skip
        return float(point.id)

    def units(self, place: str, group: str, current: float) -> int:
        """Give the units for a current, at least one."""
        return max(_LEAST.get(place, 1), round(current / self.unit_current(place, group)))

    def make(self, name: str) -> AmplifierPlan:
        """Put the plan together."""
        draft = self.draft
        counts = self._count_signal() | self._count_bias()
        counts |= self._count_sense(counts)
        stacks = dict.fromkeys(counts, 1)
        if draft.variant.is_cascoded:
            for place, (count, stack) in self._cascode_bias(counts).items():
                counts[place], stacks[place] = count, stack
        transistors = {
            place: TransistorPlan(
                self._name(place), self._length_of(place), counts[place], stacks[place]
            )
            for place in list_places(draft.variant)
        }
        resistance, capacitance = self._compensate(counts)
        return AmplifierPlan(
            name, transistors, draft.load_capacitance, draft.load_resistance,
            input_pair=draft.variant.input_pair, output=draft.variant.output,
            common_mode_sense=draft.variant.common_mode_sense,
            sense_resistance=draft.sense_resistance, sense_capacitance=draft.sense_capacitance,
            error_resistance=resistance, error_capacitance=capacitance,
        )  # fmt: skip

    def _group_of(self, place: str) -> str:
        if place in ("pair", "error_pair", "sense_pair"):
            return "pair"
        if place in _MIRRORS:
            return "mirror"
        if place in _TURNS:
            return "turn"
        if place in ("direct_cascode", "opposite_cascode"):
            return "cascode"
        if place == "follower":
            return place
        return "other" if place in _OTHER_SOURCES else "source"

    def _length_of(self, place: str) -> float:
        if place in ("bias_direct", "bias_opposite"):
            return float(self.device(place).sweep.length[-1])
        return self.length[self._group_of(place)]

    def _count_signal(self) -> dict[str, int]:
        draft, half = self.draft, 0.5 * self.draft.tail_current
        load = self.units("load", "mirror", half)
        turn = self.units("turn", "turn", half)
        direct = max(load + 1, round(draft.ratio * load))
        whole = direct / load * turn
        control = max(1, round(draft.control_share * whole))
        counts = {
            "pair": self.units("pair", "pair", half), "load": load, "copy": load,
            "direct": direct, "turn": turn, "control": control,
            "opposite": max(1, round(whole - control)),
        }  # fmt: skip
        if draft.variant.is_cascoded:
            drive = half * direct / load
            for place in ("direct_cascode", "opposite_cascode"):
                counts[place] = self.units(place, "cascode", drive)
        return counts

    def _count_bias(self) -> dict[str, int]:
        current = self.supply.reference_current
        reference = self.units("bias_reference", "source", current)
        tail = max(1, round(self.draft.tail_current / current * reference))
        other = self.units("bias_load", "other", current)
        counts = {
            "bias_reference": reference, "bias_mirror": reference, "tail": tail,
            "bias_load": other,
        }  # fmt: skip
        if self.draft.variant.is_cascoded:
            counts |= {"bias_direct_feed": reference, "bias_opposite_feed": other}
        if self.draft.variant.common_mode_sense == "followers":
            counts["follower_tail"] = reference
            counts["follower"] = self.units("follower", "follower", current)
        return counts

    def _unit_of_turn(self, counts: Mapping[str, int]) -> float:
        return 0.5 * self.draft.tail_current / counts["turn"]

    def _count_sense(self, counts: Mapping[str, int]) -> dict[str, int]:
        """Give `error_load` the current density of `control`, so that the loop settles right."""
        pairs = self.draft.variant.common_mode_sense == "pairs"
        each = self._unit_of_turn(counts) * 2 / (2 if pairs else 1)
        load = 2
        per_unit = self.supply.reference_current / counts["bias_load"]
        tail = max(1, round(2 * each / per_unit))
        if pairs:
            return {
                "error_load": load, "sense_tail": tail,
                "sense_pair": self.units("sense_pair", "pair", each),
            }  # fmt: skip
        return {
            "error_load": load, "error_tail": tail,
            "error_pair": self.units("error_pair", "pair", each),
        }  # fmt: skip

    def _cascode_bias(self, counts: Mapping[str, int]) -> dict[str, tuple[int, int]]:
        """Choose diodes whose voltage leaves the mirrors below the cascodes in saturation."""
        drive = 0.5 * self.draft.tail_current * counts["direct"] / counts["load"]
        found = {}
        for mirror, group in (("direct", "mirror"), ("opposite", "turn")):
            cascode = f"{mirror}_cascode"
            below = self.device(mirror).at(
                length=self.length[group], vds=0.3, gm_over_id=self.efficiency[group]
            )
            room = 1.25 * float(below.vdsat) + 0.05
            above = self.device(cascode).at(
                length=self.length["cascode"], vds=0.3, vsb=room, id=drive, count=counts[cascode]
            )
            feed = counts[f"bias_{mirror}_feed"]
            strength, *diode = self._diode(f"bias_{mirror}", room + float(above.vgs))
            found[f"bias_{mirror}"] = (diode[0], diode[1])
            found[f"bias_{mirror}_feed"] = (feed * strength, 1)
        return found

    def _diode(self, place: str, voltage: float) -> tuple[int, int, int]:
        """Find feed, count and stack of a diode that comes within 15 mV of a voltage, or nearest.

        A stack of s is as if it carried s times the current; a feed of f gives it f times.
        """
        current = self.supply.reference_current
        found: list[tuple[float, int, int, int]] = []
        for feed in _FEEDS:
            for stack in range(1, _LARGEST_STACK + 1):
                for count in _COUNTS:
                    reached = self._diode_voltage(place, feed * stack * current / count)
                    if reached is not None:
                        found.append((abs(reached - voltage), feed, count, stack))
            if found and min(found)[0] < _NEAR:
                break
        if not found:
            raise OutOfReach(
                f"{place} cannot carry {current:g} A in any stack of {self._name(place)}.",
                hint="Take a smaller reference current.",
            )
        _, feed, count, stack = min(found)
        return feed, count, stack

    def _diode_voltage(self, place: str, current: float) -> float | None:
        """Give the voltage of one unit as a diode; None where the table has not so much current."""
        device, length = self.device(place), self._length_of(place)
        try:
            return float(device.at(length=length, vds="diode", id=current, count=1).vgs)
        except OutOfReach:
            return None

    def _compensate(self, counts: Mapping[str, int]) -> tuple[float, float]:
        """Put the loop's unity gain at a sixth of the signal's, its zero at a quarter of that."""
        draft, half = self.draft, 0.5 * self.draft.tail_current
        kd = counts["direct"] / counts["load"]
        total = (kd + counts["opposite"] / counts["turn"]) * self.efficiency["pair"] * half
        bandwidth = total / draft.load_capacitance / 6.0
        each = self._unit_of_turn(counts)
        error = self.efficiency["pair"] * 2 * each
        control = self.efficiency["turn"] * each * counts["control"]
        resistance = bandwidth * draft.load_capacitance / (error * control)
        capacitance = 4.0 / (bandwidth * resistance)
        return _round(resistance), _round(capacitance)


def _round(value: float) -> float:
    """Keep two digits."""
    return float(f"{value:.1e}")
