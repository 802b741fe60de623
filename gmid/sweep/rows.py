"""Bias points as rows: what the recipe makes of text tables, before they lie on a grid."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from gmid.condition import Condition
from gmid.nomenclature import AXES, QUANTITIES
from gmid.quantity import format_quantity
from gmid.sweep.texttable import TextTable

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Note:
    """One line of the audit.

    Parameters
    ----------
    level : str
        ``read``, ``converted``, ``flipped``, ``derived``, ``snapped``, ``doubtful``.
    text : str
        What was found or done.

    Examples
    --------
    >>> print(Note("flipped", "id: sign turned."))
    flipped: id: sign turned.
    """

    level: str
    text: str

    def __str__(self) -> str:
        return f"{self.level}: {self.text}"


@dataclass(eq=False)
class Rows:
    """Axes and quantities of one device in one condition, one value a row, in SI.

    Parameters
    ----------
    device : str
        Name of the device.
    condition : Condition
        Corner and temperature.
    axes : dict of str to ndarray, shape (n_rows,)
        ``length vsb vds vgs``.
    values : dict of str to ndarray, shape (n_rows,)
        Quantities of one unit transistor.
    pieces : list of (int, TextTable, ndarray or None)
        First row, table it came from, and the table's rows that were taken (None for all).
    notes : list of Note
        What the audit will tell.
    files : tuple of str
        Files they came from, where `pieces` do not tell all.

    Examples
    --------
    >>> rows = Rows("nmos", Condition("tt", 27.0), {"vgs": np.zeros(2)}, {}, [])
    >>> rows.size
    2
    """

    device: str
    condition: Condition
    axes: dict[str, Array]
    values: dict[str, Array]
    pieces: Sequence[tuple[int, TextTable, NDArray[np.intp] | None]]
    notes: list[Note] = field(default_factory=list)
    files: tuple[str, ...] = ()

    @property
    def size(self) -> int:
        """Number of rows."""
        return int(next(iter(self.axes.values())).size)

    def where(self, row: int) -> str:
        """Place of a row in the text, as ``file:line``.

        Parameters
        ----------
        row : int
            Row index, from 0.

        Returns
        -------
        str
            For the `where` of an error.

        Examples
        --------
        >>> table = TextTable("a.csv", [], first_line=2)
        >>> Rows("n", Condition("tt", 27.0), {}, {}, [(0, table, None)]).where(3)
        'a.csv:5'
        """
        start, table, taken = next(piece for piece in reversed(self.pieces) if piece[0] <= row)
        local = row - start
        return table.where(int(taken[local]) if taken is not None else local)

    def point(self, row: int) -> str:
        """Bias point of a row in words.

        Parameters
        ----------
        row : int
            Row index, from 0.

        Returns
        -------
        str
            Such as ``L = 180 nm, vsb = 0 V, vds = 0.6 V, vgs = 0.5 V``.

        Examples
        --------
        >>> axes = {"length": np.array([1e-6]), "vgs": np.array([0.5])}
        >>> Rows("n", Condition("tt", 27.0), axes, {}, []).point(0)
        'L = 1 um, vgs = 500 mV'
        """
        return describe_point({name: float(axis[row]) for name, axis in self.axes.items()})

    @property
    def label(self) -> str:
        """Device and condition, for messages."""
        return f"{self.device} {self.condition}"


def describe_point(point: dict[str, float]) -> str:
    """Write a bias point as messages do.

    Parameters
    ----------
    point : dict of str to float
        Values of some of the axes [m], [V].

    Returns
    -------
    str
        Axes in the order of the table's arrays.

    Examples
    --------
    >>> describe_point({"vds": 0.6, "length": 1.8e-07})
    'L = 180 nm, vds = 600 mV'
    """
    words = {"length": "L"}
    return ", ".join(
        f"{words.get(name, name)} = {format_quantity(point[name], QUANTITIES[name].unit)}"
        for name in AXES
        if name in point
    )
