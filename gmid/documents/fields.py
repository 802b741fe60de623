"""Types of the fields of documents: numbers with units, words, conditions, levels.

Every field type reads what stands in the file into its SI value and refuses the rest with
words of its own.  Models are built on `Model`; they are frozen and know no extra keys.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field
from pydantic_core import CoreSchema, core_schema

from gmid.condition import Condition
from gmid.errors import DataFault, GmidError
from gmid.quantity import format_quantity, parse_quantity


class Model(BaseModel):
    """Base of every table of a document: frozen, no unknown keys, no silent conversion.

    Lists of a file arrive as tuples, so that fields are declared ``tuple[Length, ...]``.

    Examples
    --------
    >>> class Supply(Model):
    ...     voltage: Voltage
    >>> Supply(voltage="1.8 V").voltage
    1.8
    """

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True, allow_inf_nan=False)


class CarriedFault(ValueError):
    """A `GmidError` on its way through a validator, to be told with its place.

    Parameters
    ----------
    fault : GmidError
        What the field found.
    """

    def __init__(self, fault: GmidError) -> None:
        super().__init__(str(fault))
        self.fault = fault


def describe(value: object) -> str:
    """Say what stands in a file, for an error message.

    Parameters
    ----------
    value : object
        A value as TOML gives it.

    Returns
    -------
    str
        The value itself, or its kind when it is a table or a list.

    Examples
    --------
    >>> describe("3 A"), describe(True), describe({"a": 1})
    ("'3 A'", 'true', 'a table')
    """
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, (str, int, float)):
        text = str(value) if not isinstance(value, str) else value
        short = text if len(text) <= 60 else f"{text[:57]}..."
        return repr(short) if isinstance(value, str) else short
    if isinstance(value, Mapping):
        return "a table"
    if isinstance(value, (list, tuple)):
        return f"a list of {len(value)}" if value else "an empty list"
    return f"a {type(value).__name__}"


@dataclass(frozen=True)
class Parsed:
    """Annotation: the field is read by a function, whose errors get file, line and key.

    Parameters
    ----------
    read : callable
        Takes the value as TOML gives it and returns the field's value; raises `GmidError`.

    Examples
    --------
    >>> class Corner(Model):
    ...     condition: Annotated[Condition, Parsed(read_condition)]
    >>> Corner(condition="tt/27").condition
    Condition('tt/27')
    """

    read: Callable[[Any], Any]

    def __get_pydantic_core_schema__(self, source: object, handler: object) -> CoreSchema:
        """Give the validator that the model library calls."""
        return core_schema.no_info_plain_validator_function(self._validate)

    def _validate(self, value: object) -> object:
        try:
            return self.read(value)
        except GmidError as fault:
            raise CarriedFault(fault) from None


@dataclass(frozen=True)
class Unit:
    """Annotation: the field is a number with a unit, or a bare number in SI.

    Parameters
    ----------
    unit : str
        A key of `gmid.quantity.UNIT_WORDS`.
    above, at_least, at_most : float, optional
        Range of the value, in SI.

    Examples
    --------
    >>> class Cut(Model):
    ...     edge: Annotated[float, Unit("Hz", above=0.0)]
    >>> Cut(edge="400 kHz").edge
    400000.0
    """

    unit: str
    above: float | None = None
    at_least: float | None = None
    at_most: float | None = None

    def __get_pydantic_core_schema__(self, source: object, handler: object) -> CoreSchema:
        """Give the validator that the model library calls."""
        return core_schema.no_info_plain_validator_function(Parsed(self.read)._validate)

    def read(self, value: object) -> float:
        """Read one value into SI.

        Parameters
        ----------
        value : object
            A text or a number.

        Returns
        -------
        float
            The value in SI.

        Raises
        ------
        DataFault
            If it is no number in that unit, or out of range.

        Examples
        --------
        >>> Unit("Hz").read("2 MHz")
        2000000.0
        """
        if not isinstance(value, (str, int, float)):
            raise DataFault(f"expected a number with a unit, found {describe(value)}.")
        number = parse_quantity(value, self.unit)
        if self.above is not None and number <= self.above:
            raise self._outside(value, "above", self.above)
        if self.at_least is not None and number < self.at_least:
            raise self._outside(value, "at least", self.at_least)
        if self.at_most is not None and number > self.at_most:
            raise self._outside(value, "at most", self.at_most)
        return number

    def _outside(self, value: object, word: str, bound: float) -> DataFault:
        limit = format_quantity(bound, self.unit, digits=6)
        return DataFault(f"must be {word} {limit}, found {describe(value)}.")


def read_condition(value: object) -> Condition:
    """Read ``corner/temperature`` from a document.

    Parameters
    ----------
    value : object
        Such as ``"tt/27"``.

    Returns
    -------
    Condition
        The condition.

    Raises
    ------
    DataFault
        If it is no text of that form.

    Examples
    --------
    >>> read_condition("ss/-40")
    Condition('ss/-40')
    """
    if not isinstance(value, str):
        raise DataFault(
            f"expected a condition, found {describe(value)}.",
            hint="Write corner/temperature in quotes, such as 'tt/27'.",
        )
    return Condition.parse(value)


@dataclass(frozen=True)
class Level:
    """A voltage, or a share of the supply.

    Parameters
    ----------
    value : float
        Voltage [V], or ratio to the supply [-].
    is_share : bool
        True when `value` is a share of the supply.

    Examples
    --------
    >>> Level(0.5, is_share=True).at(1.8), Level(0.8).at(1.8)
    (0.9, 0.8)
    """

    value: float
    is_share: bool = False

    def at(self, supply: float) -> float:
        """Give the voltage at some supply.

        Parameters
        ----------
        supply : float
            Supply voltage [V].

        Returns
        -------
        float
            The level [V].

        Examples
        --------
        >>> Level(0.25, is_share=True).at(2.0)
        0.5
        """
        return self.value * supply if self.is_share else self.value

    def __str__(self) -> str:
        return format_quantity(self.value, "%" if self.is_share else "V", digits=6)


def read_level(value: object) -> Level:
    """Read a voltage or a percentage of the supply.

    Parameters
    ----------
    value : object
        ``"50 %"`` is a share; ``"0.9 V"`` or a bare number is a voltage.

    Returns
    -------
    Level
        Which of the two it is, with its value.

    Raises
    ------
    DataFault
        If it is neither, or below 0, or a share above 100 %.

    Examples
    --------
    >>> read_level("50 %")
    Level(value=0.5, is_share=True)
    """
    if isinstance(value, str) and value.strip().endswith("%"):
        return Level(Unit("%", at_least=0.0, at_most=1.0).read(value), is_share=True)
    try:
        return Level(Unit("V").read(value))
    except DataFault as fault:
        raise DataFault(
            fault.message, hint="Write a share of the supply, '50 %', or a voltage, '0.9 V'."
        ) from None


def _auto_to_none(value: object) -> object:
    return None if isinstance(value, str) and value == "auto" else value


AUTO = BeforeValidator(_auto_to_none)
"""Annotation for ``Annotated[Length | None, AUTO]``: the word ``auto`` is read as None."""

Length = Annotated[float, Unit("m", above=0.0)]
Area = Annotated[float, Unit("m^2", above=0.0)]
Voltage = Annotated[float, Unit("V")]
PositiveVoltage = Annotated[float, Unit("V", above=0.0)]
Current = Annotated[float, Unit("A", above=0.0)]
Conductance = Annotated[float, Unit("S", at_least=0.0)]
Resistance = Annotated[float, Unit("ohm", at_least=0.0)]
Capacitance = Annotated[float, Unit("F", at_least=0.0)]
Power = Annotated[float, Unit("W", at_least=0.0)]
Time = Annotated[float, Unit("s", at_least=0.0)]
Frequency = Annotated[float, Unit("Hz", above=0.0)]
TemperatureC = Annotated[float, Unit("degC", above=-273.15)]
Ratio = Annotated[float, Unit("%", at_least=0.0)]
Decibel = Annotated[float, Unit("dB")]
Degrees = Annotated[float, Unit("deg")]
Number = Annotated[float, Unit("")]
SlewRate = Annotated[float, Unit("V/s", above=0.0)]
NoiseDensity = Annotated[float, Unit("V/rtHz", above=0.0)]
MatchingVoltage = Annotated[float, Unit("V m", at_least=0.0)]
MatchingRatio = Annotated[float, Unit("% m", at_least=0.0)]
CapacitanceDensity = Annotated[float, Unit("F/m^2", above=0.0)]
CapacitancePerResistance = Annotated[float, Unit("F/ohm", at_least=0.0)]
SupplyLevel = Annotated[Level, Parsed(read_level)]
ConditionText = Annotated[Condition, Parsed(read_condition)]
Text = Annotated[str, Field(min_length=1)]
Count = Annotated[int, Field(ge=1)]
Flag = bool
