"""What a sized amplifier is: lengths and unit counts by place, its elements, its supply.

Numbers may be arrays over candidates; they broadcast against each other and against the
supplies of a prediction.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.amplifier.places import Variant, list_places
from gmid.amplifier.setting import Choices, Level, Matching, Supply
from gmid.errors import DataFault, UnknownName, advise, raise_faults

if TYPE_CHECKING:
    from gmid.sweep.listing import DataFrame

__all__ = [
    "BULKS",
    "AmplifierPlan",
    "Choices",
    "Level",
    "Matching",
    "Requirement",
    "Supply",
    "TransistorPlan",
]

Array = NDArray[np.float64]

_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]*")

BULKS = ("rail", "source")
"""Where a bulk may be tied."""


@dataclass(frozen=True, eq=False)
class TransistorPlan:
    """One place of an amplifier: which device, how long, how many units.

    Parameters
    ----------
    device : str
        Name of a device of the table.
    length : float or ndarray, shape (...)
        Channel length of one unit [m].
    count : int or ndarray, shape (...)
        Units in parallel of one instance [-].
    stack : int
        Units in series, all gates together [-].
    bulk : {"rail", "source"}
        Where the bulk goes; to the source only for a device with a well of its own.

    Examples
    --------
    >>> TransistorPlan("nmos", 0.4e-6, 4)
    TransistorPlan(device='nmos', length=4e-07, count=4, stack=1, bulk='rail')
    """

    device: str
    length: ArrayLike
    count: ArrayLike
    stack: int = 1
    bulk: str = "rail"


@dataclass(frozen=True)
class Requirement:
    """One number that an amplifier has to reach.

    Parameters
    ----------
    value : float
        In SI; gains in dB where the name is `dc_gain`, margins in degrees.
    at : float, optional
        Frequency it holds at [Hz], for `input_noise`.
    because : str
        Where it comes from, for the sheet.

    Examples
    --------
    >>> Requirement(40e-9, at=1e6).at
    1000000.0
    """

    value: float
    at: float | None = None
    because: str = "asked for"


@dataclass(frozen=True, eq=False)
class AmplifierPlan:
    """A fully differential current-mirror amplifier, place by place.

    Parameters
    ----------
    name : str
        Name of its subcircuit.
    transistors : mapping of str to TransistorPlan
        By place; exactly the places of its variant.
    load_capacitance : float or ndarray, shape (...)
        From each output to ground [F].
    load_resistance : float or ndarray, shape (...)
        From each output to vcm [ohm]; infinite for none.
    input_pair : {"n", "p"}
        Channel of the input pair.
    output : {"plain", "cascoded"}
        Kind of output.
    common_mode_sense : {"resistors", "followers", "pairs"}
        How the outputs are sensed.
    sense_resistance, sense_capacitance : float or ndarray, shape (...)
        From each output (or follower) to the sense node [ohm], [F]; not used by pairs.
    error_resistance, error_capacitance : float or ndarray, shape (...)
        In series from the gate of `control` to its rail [ohm], [F]: they compensate the
        common-mode loop.
    output_capacitance : float or ndarray, shape (...)
        Built in from each output to the rail of `opposite` [F]; zero for none. It buys phase
        margin where the load alone is too small.
    positions : tuple of str
        Where it stands in the filter.
    multiple : int
        So many amplifiers in parallel: multiplies counts, capacitances and currents inside
        (the reference current too) and divides resistances; the load stays as it is.
    demands : mapping of str to Requirement
        What it has to reach.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> example_plan()
    AmplifierPlan(a1: n-input, plain, resistors, 14 places)
    """

    name: str
    transistors: Mapping[str, TransistorPlan]
    load_capacitance: ArrayLike
    load_resistance: ArrayLike = np.inf
    input_pair: str = "n"
    output: str = "plain"
    common_mode_sense: str = "resistors"
    sense_resistance: ArrayLike = 500e3
    sense_capacitance: ArrayLike = 50e-15
    error_resistance: ArrayLike = 50e3
    error_capacitance: ArrayLike = 100e-15
    output_capacitance: ArrayLike = 0.0
    positions: tuple[str, ...] = ()
    multiple: int = 1
    demands: Mapping[str, Requirement] = field(default_factory=dict)

    def __post_init__(self) -> None:
        """Refuse what is no amplifier of this topology."""
        raise_faults(self._find_faults())

    def _find_faults(self) -> list[DataFault | UnknownName]:
        places = list_places(self.variant)
        faults: list[DataFault | UnknownName] = [
            UnknownName(
                f"{self.name} has no place {place!r}.",
                where=f"transistors.{place}",
                hint=advise(place, places),
            )
            for place in self.transistors
            if place not in places
        ]
        missing = [place for place in places if place not in self.transistors]
        if missing:
            faults.append(DataFault(
                f"{self.name} lacks {', '.join(missing)}.",
                where="transistors",
                hint=f"A {self.variant} has {', '.join(places)}.",
            ))  # fmt: skip
        if _NAME.fullmatch(self.name) is None:
            faults.append(DataFault(
                f"{self.name!r} cannot name a subcircuit.", where="name",
                hint="Use letters, digits and _, starting with a letter.",
            ))  # fmt: skip
        for place, one in self.transistors.items():
            faults += _check_transistor(place, one)
        for key in ("load_capacitance", "load_resistance", "sense_resistance",
                    "sense_capacitance", "error_resistance", "error_capacitance"):  # fmt: skip
            if not np.all(np.asarray(getattr(self, key)) > 0):
                faults.append(DataFault(f"{key} of {self.name} must be positive.", where=key))
        if not np.all(np.asarray(self.output_capacitance) >= 0):
            faults.append(DataFault(
                f"output_capacitance of {self.name} is below 0.", where="output_capacitance"
            ))  # fmt: skip
        if not faults:
            faults += self._find_starved()
        if self.multiple != int(self.multiple) or self.multiple < 1:
            faults.append(DataFault("multiple is a whole number from 1 up.", where="multiple"))
        return faults

    def _find_starved(self) -> list[DataFault | UnknownName]:
        """Refuse ratios of like transistors that leave `control` nothing to carry."""
        groups = ("load", "direct", "copy"), ("turn", "opposite")
        for group in groups:
            parts = [self.transistors[place] for place in group]
            alike = {(one.device, one.stack, str(one.length)) for one in parts}
            if len(alike) > 1 or any(np.ndim(one.count) for one in parts):
                return []
        load, direct, copy, turn, opposite = (
            float(self.count(place)) for group in groups for place in group
        )
        if direct > copy * opposite / turn:
            return []
        return [DataFault(
            f"the counts leave control no current: direct carries {direct / load:.3g} times the "
            f"load's current, opposite {copy * opposite / (load * turn):.3g} times.",
            where="transistors.control",
            hint="Give opposite fewer units, or direct more.",
        )]  # fmt: skip

    @property
    def variant(self) -> Variant:
        """Which of the topology's forms it is."""
        return Variant(self.input_pair, self.output, self.common_mode_sense)

    def count(self, place: str) -> Array:
        """Give the units in parallel of one instance, `multiple` included.

        Parameters
        ----------
        place : str
            The place.

        Returns
        -------
        ndarray, shape (...)
            Units [-].
        """
        return np.asarray(self.transistors[place].count, dtype=np.float64) * self.multiple

    def with_place(self, place: str, **changes: ArrayLike | str) -> AmplifierPlan:
        """Return a plan with one place changed.

        Parameters
        ----------
        place : str
            The place.
        **changes
            Fields of `TransistorPlan`.

        Returns
        -------
        AmplifierPlan
            A new plan.

        Examples
        --------
        >>> from gmid.amplifier.example import example_plan
        >>> int(example_plan().with_place("pair", count=8).count("pair"))
        8
        """
        if place not in self.transistors:
            raise UnknownName(
                f"{self.name} has no place {place!r}.", hint=advise(place, self.transistors)
            )
        one = replace(self.transistors[place], **changes)  # type: ignore[arg-type]
        return replace(self, transistors={**self.transistors, place: one})

    def __repr__(self) -> str:
        return f"AmplifierPlan({self.name}: {self.variant}, {len(self.transistors)} places)"

    def to_frame(self) -> DataFrame:
        """List the transistors of one candidate as a data frame.

        Returns
        -------
        DataFrame
            Columns ``place device length count stack bulk``, SI; counts without `multiple`.
        """
        from gmid.amplifier.plan_listing import frame_plan

        return frame_plan(self)

    def _repr_html_(self) -> str:
        from gmid.amplifier.plan_listing import list_plan

        return list_plan(self)


def _check_transistor(place: str, one: TransistorPlan) -> list[DataFault | UnknownName]:
    faults: list[DataFault | UnknownName] = []
    where = f"transistors.{place}"
    for key in ("count", "stack"):
        numbers = np.asarray(getattr(one, key), dtype=np.float64)
        if np.any(numbers != np.round(numbers)) or np.any(numbers < 1):
            wrong = numbers[(numbers != np.round(numbers)) | (numbers < 1)]
            faults.append(DataFault(
                f"{key} is {wrong.ravel()[0]:g}.",
                where=f"{where}.{key}",
                hint="It is a whole number of unit transistors, from 1 up.",
            ))  # fmt: skip
    if not np.all(np.asarray(one.length, dtype=np.float64) > 0):
        faults.append(DataFault("a length must be positive.", where=f"{where}.length"))
    if one.bulk not in BULKS:
        faults.append(UnknownName(
            f"bulk is {one.bulk!r}.", where=f"{where}.bulk", hint=advise(one.bulk, BULKS)
        ))  # fmt: skip
    return faults
