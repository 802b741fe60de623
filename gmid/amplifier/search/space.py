"""What a search may vary: the numbers of one form of amplifier, as steps on lists of values.

A candidate is a row of positions; `Space.plan` makes an `AmplifierPlan` of many rows at once.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.amplifier.places import PLACES, Variant, list_places
from gmid.amplifier.plan import AmplifierPlan, Choices, Requirement, TransistorPlan
from gmid.errors import DataFault

Array = NDArray[np.float64]
Rows = NDArray[np.intp]

GROUPS = {
    "pair": ("pair",), "mirror": ("load", "direct", "copy"),
    "turn": ("turn", "opposite", "control", "error_load"),
    "source": ("tail", "bias_reference", "bias_mirror", "follower_tail", "bias_direct_feed"),
    "other": ("bias_load", "error_tail", "sense_tail", "bias_opposite_feed"),
    "sense": ("error_pair", "sense_pair"), "follower": ("follower",),
    "direct_cascode": ("direct_cascode",), "opposite_cascode": ("opposite_cascode",),
    "bias_direct": ("bias_direct",), "bias_opposite": ("bias_opposite",),
}  # fmt: skip
"""Places that share a length: mirrors that share a ratio."""

ELEMENTS = ("sense_resistance", "sense_capacitance", "error_resistance", "error_capacitance")
"""Resistors and capacitors of the common-mode loop."""

_RESISTANCES = np.array([
    2e3, 3e3, 5e3, 7e3, 10e3, 14e3, 20e3, 28e3, 40e3, 56e3, 80e3, 110e3, 150e3, 220e3, 300e3,
    430e3, 600e3, 820e3, 1e6,
])  # fmt: skip
_CAPACITANCES = np.array([
    5e-15, 10e-15, 20e-15, 50e-15, 0.1e-12, 0.2e-12, 0.3e-12, 0.5e-12, 0.7e-12, 1e-12, 1.4e-12,
    2e-12, 3e-12, 4e-12, 6e-12, 8e-12, 12e-12,
])  # fmt: skip


@dataclass(frozen=True)
class Form:
    """One form of the amplifier, with a device for each place.

    Parameters
    ----------
    variant : Variant
        Input, output, sensing.
    devices : mapping of str to str
        Device by place.
    own_well : tuple of str
        Devices whose bulk may go to the source.
    stack : int
        Units in series of the diodes that bias cascodes.

    Examples
    --------
    >>> form = make_form(Variant(), {"n": "nmos", "p": "pmos"}, (), Choices())
    >>> form.devices["load"]
    'pmos'
    """

    variant: Variant
    devices: Mapping[str, str]
    own_well: tuple[str, ...] = ()
    stack: int = 4

    def bulk(self, place: str) -> str:
        """Say where the bulk of a place goes.

        Parameters
        ----------
        place : str
            The place.

        Returns
        -------
        {"rail", "source"}
            To the source where source and rail differ and the device may have its own well.
        """
        lifted = place in ("pair", "sense_pair", "error_pair", "follower")
        return "source" if lifted and self.devices[place] in self.own_well else "rail"


def make_form(
    variant: Variant, roles: Mapping[str, str], own_well: Sequence[str], choices: Choices,
    polarity: Mapping[str, str] | None = None,
) -> Form:  # fmt: skip
    """Choose the device of every place of a form.

    Parameters
    ----------
    variant : Variant
        Input, output, sensing.
    roles : mapping of str to str
        Device by role: `n`, `p`, and flavours `pair`, `follower`, `cascode`.
    own_well : sequence of str
        Devices whose bulk may go to the source.
    choices : Choices
        Its largest stack counts.
    polarity : mapping of str to str, optional
        Channel by device, ``n`` or ``p``; a flavour is used where its channel fits.

    Returns
    -------
    Form
        With a device for each place.

    Examples
    --------
    >>> roles = {"n": "nmos", "p": "pmos", "follower": "nmos_low"}
    >>> form = make_form(Variant(common_mode_sense="followers"), roles, (), Choices(),
    ...                  {"nmos_low": "n"})
    >>> form.devices["follower"]
    'nmos_low'
    """
    known = polarity or {}
    flavour = {
        "pair": "pair", "follower": "follower", "direct_cascode": "cascode",
        "opposite_cascode": "cascode",
    }  # fmt: skip
    devices = {}
    for place in list_places(variant):
        channel = PLACES[place].polarity(variant.input_pair)
        special = roles.get(flavour.get(place, ""))
        fits = special is not None and known.get(special) == channel
        devices[place] = special if special is not None and fits else roles[channel]
    return Form(variant, devices, tuple(own_well), choices.largest_stack)


@dataclass(frozen=True, eq=False)
class Space:
    """The values that each number of a form may take.

    Parameters
    ----------
    form : Form
        Form and devices.
    choices : Choices
        Bounds.
    lengths : tuple of float
        Lengths to choose from [m].

    Examples
    --------
    >>> form = make_form(Variant(), {"n": "nmos", "p": "pmos"}, (), Choices())
    >>> space = Space(form, Choices(largest_count=6), (0.2e-6, 0.5e-6))
    >>> space.values["count.pair"].tolist(), space.values["length.pair"].tolist()
    ([2.0, 4.0, 6.0], [2e-07, 5e-07])
    """

    form: Form
    choices: Choices
    lengths: tuple[float, ...]

    @cached_property
    def places(self) -> tuple[str, ...]:
        """Places of the form."""
        return list_places(self.form.variant)

    @cached_property
    def groups(self) -> dict[str, tuple[str, ...]]:
        """Places by group of one length, absent ones left out."""
        found = {
            group: tuple(place for place in members if place in self.places)
            for group, members in GROUPS.items()
        }
        return {group: members for group, members in found.items() if members}

    @cached_property
    def values(self) -> dict[str, Array]:
        """Allowed values by variable, rising: ``length.GROUP``, ``count.PLACE``, elements."""
        found: dict[str, Array] = {}
        smallest = self.choices.smallest_length
        for group, members in self.groups.items():
            least = max((smallest.get(place, 0.0) for place in members), default=0.0)
            allowed = np.array([one for one in sorted(self.lengths) if one >= least * (1 - 1e-9)])
            if not allowed.size:
                raise DataFault(
                    f"no length is left for {', '.join(members)}: the longest is "
                    f"{max(self.lengths) * 1e6:g} um.",
                    where="amplifier.smallest_length",
                )
            found[f"length.{group}"] = allowed
        for place in self.places:
            found[f"count.{place}"] = self._counts(place)
        found |= self._elements()
        return found

    def _counts(self, place: str) -> Array:
        matched = self.choices.even_counts and bool(PLACES[place].sides)
        step = 2 if matched and self.choices.largest_count >= 2 else 1
        return np.arange(step, self.choices.largest_count + 1, step, dtype=np.float64)

    def _elements(self) -> dict[str, Array]:
        largest = self.choices.largest_sense_resistor
        sense = np.unique(np.append(_RESISTANCES[(largest > _RESISTANCES) & (_RESISTANCES >= 2e4)],
                                    largest))  # fmt: skip
        return {
            "sense_resistance": sense, "sense_capacitance": _CAPACITANCES[:5],
            "error_resistance": _RESISTANCES, "error_capacitance": _CAPACITANCES[4:],
        }  # fmt: skip

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Variables, in the order of a row."""
        return tuple(self.values)

    @cached_property
    def column(self) -> dict[str, int]:
        """Column of each variable in a row."""
        return {name: k for k, name in enumerate(self.names)}

    @cached_property
    def largest(self) -> Rows:
        """Largest position of each variable, shape (variables,)."""
        return np.array([self.values[name].size - 1 for name in self.names], dtype=np.intp)

    def read(self, rows: Rows, name: str) -> Array:
        """Give the values of a variable.

        Parameters
        ----------
        rows : ndarray of int, shape (n, variables)
            Candidates.
        name : str
            Variable.

        Returns
        -------
        ndarray, shape (n,)
            Values.
        """
        return np.asarray(self.values[name][rows[:, self.column[name]]])

    def locate(self, numbers: Mapping[str, Array]) -> Rows:
        """Find the nearest allowed candidates.

        Parameters
        ----------
        numbers : mapping of str to ndarray, shape (n,)
            Values of every variable.

        Returns
        -------
        ndarray of int, shape (n, variables)
            Positions; nearest by ratio.
        """
        columns = []
        for name in self.names:
            allowed = np.log(self.values[name])
            wanted = np.log(np.maximum(np.asarray(numbers[name], dtype=np.float64), 1e-30))
            middle = 0.5 * (allowed[1:] + allowed[:-1])
            columns.append(np.searchsorted(middle, wanted))
        return np.stack(np.broadcast_arrays(*columns), axis=-1).astype(np.intp)

    def plan(
        self, rows: Rows, *, name: str, load_capacitance: float, load_resistance: float,
        demands: Mapping[str, Requirement] | None = None,
    ) -> AmplifierPlan:  # fmt: skip
        """Make a plan of candidates, with a last axis left for supplies.

        Parameters
        ----------
        rows : ndarray of int, shape (n, variables)
            Candidates.
        name : str
            Name of the plan.
        load_capacitance, load_resistance : float
            At each output [F], [ohm].
        demands : mapping of str to Requirement, optional
            What it has to reach.

        Returns
        -------
        AmplifierPlan
            Its numbers have the shape (n, 1).
        """
        group_of = {place: group for group, members in self.groups.items() for place in members}
        transistors = {
            place: TransistorPlan(
                self.form.devices[place],
                self.read(rows, f"length.{group_of[place]}")[:, None],
                self.read(rows, f"count.{place}")[:, None],
                self.form.stack if place in ("bias_direct", "bias_opposite") else 1,
                self.form.bulk(place),
            )
            for place in self.places
        }
        variant = self.form.variant
        element = {key: self.read(rows, key)[:, None] for key in ELEMENTS}
        return AmplifierPlan(
            name, transistors, load_capacitance, load_resistance, variant.input_pair,
            variant.output, variant.common_mode_sense, demands=demands or {},
            sense_resistance=element["sense_resistance"],
            sense_capacitance=element["sense_capacitance"],
            error_resistance=element["error_resistance"],
            error_capacitance=element["error_capacitance"],
        )  # fmt: skip

    def single(
        self, row: Rows, *, name: str, load_capacitance: float, load_resistance: float,
        demands: Mapping[str, Requirement] | None = None,
    ) -> AmplifierPlan:  # fmt: skip
        """Make the plan of one candidate, with plain numbers.

        Parameters
        ----------
        row : ndarray of int, shape (variables,)
            The candidate.
        name : str
            Name of the plan.
        load_capacitance, load_resistance : float
            At each output [F], [ohm].
        demands : mapping of str to Requirement, optional
            What it has to reach.

        Returns
        -------
        AmplifierPlan
            Ready to be written.
        """
        many = self.plan(
            row[None], name=name, load_capacitance=load_capacitance,
            load_resistance=load_resistance, demands=demands,
        )  # fmt: skip
        transistors = {
            place: replace(
                one, length=float(np.ravel(one.length)[0]), count=int(np.ravel(one.count)[0])
            )
            for place, one in many.transistors.items()
        }
        return replace(
            many, transistors=transistors, sense_resistance=_first(many.sense_resistance),
            sense_capacitance=_first(many.sense_capacitance),
            error_resistance=_first(many.error_resistance),
            error_capacitance=_first(many.error_capacitance),
        )  # fmt: skip


def _first(values: ArrayLike) -> float:
    return float(np.ravel(values)[0])
