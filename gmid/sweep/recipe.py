"""The recipe: where in a text each axis and each quantity of a sweep is to be found."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

from gmid.sweep.model import UnitTransistor

ORIGINS = ("name", "title", "comment", "header", "step", "column")
"""Places from which one value for a whole table can be taken; ``column``: the columns' names."""


@dataclass(frozen=True)
class ValueSource:
    """Where the values of one axis, quantity or condition come from.

    Exactly one of `expression`, `value`, `origin`, `restart`, `derived`, `preceding`,
    `admittance` and `spectrum` is set.

    Parameters
    ----------
    expression : str, optional
        In the file's column names.
    unit : str, optional
        Unit of the expression, the captured text or the restart values, as spelled.
    value : float or str, optional
        One value for all rows, in SI (or a word, for a corner).
    origin : str, optional
        One of `ORIGINS`.
    pattern : str, optional
        Regular expression searched in the origin; its first group is the value.
    restart : tuple of float, optional
        Values of an axis that no column holds, in SI.
    outside : str
        The axis whose restart moves a `restart` axis to its next value.
    derived : bool
        Ignore what the file has and derive the quantity.
    values : mapping of str to float, optional
        What each captured text stands for, in SI.
    preceding : str, optional
        Expression in the columns of the nearest table above that has one row.
    admittance : str, optional
        Expression of the complex current into a terminal per volt that drives another.
    spectrum : str, optional
        Expression of a noise density along a column of frequencies.
    resistance : float, optional
        Resistance in which the noise current of a voltage spectrum flows [ohm].
    where : str, optional
        Place in the recipe.

    Examples
    --------
    >>> ValueSource(expression="-i(vd)").expression
    '-i(vd)'
    """

    expression: str | None = None
    unit: str | None = None
    value: float | str | None = None
    origin: str | None = None
    pattern: str | None = None
    restart: tuple[float, ...] | None = None
    outside: str = "vgs"
    derived: bool = False
    values: Mapping[str, float] | None = None
    preceding: str | None = None
    admittance: str | None = None
    spectrum: str | None = None
    resistance: float | None = None
    where: str | None = None


@dataclass(frozen=True)
class SweepRecipe:
    """How to read one device's sweep.

    Parameters
    ----------
    device : str
        Name of the device in the table.
    unit : UnitTransistor
        What was simulated.
    files : tuple of Path
        The text files.
    axes, quantities : mapping of str to ValueSource
        By standard name; what is absent is taken from a column of that very name, if any.
    corner, temperature : ValueSource
        Condition; the temperature in degrees Celsius.
    nominal : bool
        Whether queries take this condition by default.
    layout : str
        Name of a text layout, or ``auto``.
    columns : tuple of str
        Column names of a file without header.
    suffixes : str, optional
        Dialect of engineering suffixes, ``spice`` or ``si``.
    rows : mapping of str to str
        Keep only the rows whose column of words holds this word.
    record : str, optional
        Regular expression of the line that begins a record of an operating-point listing.
    plots : str, optional
        Regular expression; tables whose plot name and title it does not fit are left out.
    frequency : float, optional
        Frequency at which admittances are read [Hz].
    where : str, optional
        Place in the recipe.

    Examples
    --------
    >>> SweepRecipe("nmos", UnitTransistor("n", 2e-6), (Path("a.csv"),)).device
    'nmos'
    """

    device: str
    unit: UnitTransistor
    files: tuple[Path, ...]
    axes: Mapping[str, ValueSource] = field(default_factory=dict)
    quantities: Mapping[str, ValueSource] = field(default_factory=dict)
    corner: ValueSource = ValueSource(value="tt")
    temperature: ValueSource = ValueSource(value=27.0)
    nominal: bool = False
    layout: str = "auto"
    columns: tuple[str, ...] = ()
    suffixes: str | None = None
    rows: Mapping[str, str] = field(default_factory=dict)
    record: str | None = None
    plots: str | None = None
    frequency: float | None = None
    where: str | None = None


@dataclass(frozen=True)
class Recipe:
    """A whole recipe file.

    Parameters
    ----------
    process : str
        Name of the process, for the table.
    sweeps : tuple of SweepRecipe
        At least one.
    text : str
        The recipe as written, kept as provenance.
    name : str
        The recipe's file name, for messages.

    Examples
    --------
    >>> Recipe("larch180", (), "", "larch180.toml").process
    'larch180'
    """

    process: str
    sweeps: tuple[SweepRecipe, ...]
    text: str
    name: str
