"""Headers of SPICE3 raw plots: keys, variables with their types and attributes."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from gmid.errors import DataFault
from gmid.sweep.bytestream import ByteStream
from gmid.sweep.numbers import is_number
from gmid.sweep.source import TextSource, decode_line

_KEY = re.compile(r"\s*(?P<key>[A-Za-z][A-Za-z. _]*?)\s*:(?P<value>.*)", re.DOTALL)
_UNITS = {
    "voltage": "V", "current": "A", "admittance": "S", "conductance": "S", "capacitance": "F",
    "impedance": "ohm", "resistance": "ohm", "frequency": "Hz", "time": "s", "charge": None,
    "notype": None,
}  # fmt: skip
_HEADER = {
    "plotname", "flags", "no. variables", "no. points", "variables", "values", "binary",
}  # fmt: skip
_META = {"title": "title", "plotname": "plot"}


@dataclass(frozen=True)
class Variable:
    """One vector of a plot.

    Parameters
    ----------
    name : str
        As the file spells it, blanks included.
    unit : str or None
        Hint from the type word.
    size : int or None
        Number of points when an attribute ``dims`` gives it.
    line : int
        Line of its declaration.
    """

    name: str
    unit: str | None
    size: int | None
    line: int


@dataclass
class Plot:
    """The header of one plot.

    Parameters
    ----------
    number : int
        Of the plot in its file, from 1.
    meta : dict of str to str
        Title, plot name and further keys.
    variables : list of Variable
        In order.
    is_complex, is_unpadded : bool
        From the flags.
    announced : int or None
        Number of points that the header announces.
    points_line, values_line : int
        Lines of ``No. Points:`` and ``Values:``.
    found_points : int
        Set when the values have been read.
    is_binary : bool
        Whether the values are no text.
    skipped : int
        Lines of a log before the header.
    """

    number: int
    meta: dict[str, str]
    variables: list[Variable]
    is_complex: bool
    is_unpadded: bool
    announced: int | None
    points_line: int
    values_line: int
    found_points: int = 0
    is_binary: bool = False
    skipped: int = 0


def read_header(source: TextSource, stream: ByteStream, number: int) -> Plot | None:
    r"""Read lines up to and with ``Values:`` or ``Binary:``.

    Parameters
    ----------
    source : TextSource
        For messages.
    stream : ByteStream
        Behind the values of the plot before.
    number : int
        Number of the plot, from 1.

    Returns
    -------
    Plot or None
        None at the end of the file.

    Raises
    ------
    DataFault
        If the header is incomplete or contradicts itself.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> text = (b"Title: t\nPlotname: dc\nFlags: real\nNo. Variables: 1\nNo. Points: 1\n"
    ...         b"Variables:\n\t0\tv(d)\tvoltage\nValues:\n 0\t0.5\n")
    >>> source = open_bytes(text, name="a.raw")
    >>> with source.stream() as stream:
    ...     plot = read_header(source, stream, 1)
    >>> plot.variables[0].name, plot.announced
    ('v(d)', 1)
    """
    keys: dict[str, tuple[str, int]] = {}
    variables: list[Variable] = []
    in_variables = False
    skipped = _skip_log(source, stream) if number == 1 else 0
    while raw := stream.readline():
        text = decode_line(raw.rstrip(b"\n"))
        if not text.strip():
            continue
        match = _KEY.fullmatch(text)
        variable = _read_variable(text, stream.line) if in_variables else None
        if variable is not None:
            variables.append(variable)
        elif match is None:
            raise DataFault(
                f"expected a header line 'Key: value', found {text.strip()[:60]!r}.",
                where=source.where(stream.line), hint="The file is damaged: write it again.",
            )  # fmt: skip
        else:
            key = match["key"].lower()
            if key in ("values", "binary"):
                plot = _make_plot(source, keys, variables, number, stream.line)
                plot.is_binary, plot.skipped = key == "binary", skipped
                return plot
            in_variables = key == "variables"
            first = _read_variable(match["value"], stream.line) if in_variables else None
            if first is not None:
                variables.append(first)
            keys[key] = match["value"].strip(), stream.line
    if keys:
        raise DataFault(
            f"the file ends inside the header of plot {number}: there is no 'Values:' line.",
            where=source.where(stream.line), hint="Did the simulation run to its end?",
        )  # fmt: skip
    return None


def _skip_log(source: TextSource, stream: ByteStream) -> int:
    """Skip lines of a log before the first title, and count them.

    Where numbers or lines of a header stand among them the file is damaged: nothing is skipped.
    """
    before: list[str] = []
    for text in source.head_lines():
        if text.lower().startswith("title:"):
            break
        before.append(text)
    else:
        return 0
    keys = [_KEY.match(text) for text in before if text.strip()]
    if all(keys) or any(key["key"].lower() in _HEADER for key in keys if key):
        return 0
    if any(is_number(text.split()[0]) for text in before if text.strip()):
        return 0
    for _ in before:
        stream.readline()
    return sum(map(bool, map(str.strip, before)))


def _read_variable(text: str, line: int) -> Variable | None:
    """Read ``index name type attributes``, split at TABs or, without any, at blanks."""
    cells = [cell.strip() for cell in text.split("\t")]
    cells = [cell for cell in cells if cell] if "\t" in text.strip() else text.split()
    if len(cells) < 2 or not cells[0].isdigit():
        return None
    kind, *attributes = " ".join(cells[2:]).split() or ["notype"]
    size = None
    for attribute in attributes:
        key, _, value = attribute.partition("=")
        if key.lower() == "dims" and re.fullmatch(r"\d+(?:,\d+)*", value):
            size = math.prod(map(int, value.split(",")))
    return Variable(cells[1], _unit(cells[1], kind.lower()), size, line)


def _unit(name: str, kind: str) -> str | None:
    """Turn a type word into a unit; device quantities are often all called voltages."""
    if kind == "voltage" and "@" in name:
        return None
    return _UNITS.get(kind)


def _make_plot(
    source: TextSource, keys: dict[str, tuple[str, int]], variables: list[Variable], number: int,
    line: int,
) -> Plot:  # fmt: skip
    flags = keys.get("flags", ("real", line))[0].lower().split()
    where = source.where(line)
    if not variables:
        raise DataFault(
            f"plot {number} declares no variables.", where=where,
            hint="The file is damaged: write it again.",
        )  # fmt: skip
    count, count_line = keys.get("no. variables", (str(len(variables)), line))
    if count != str(len(variables)):
        raise DataFault(
            f"expected {count} variables as announced, found {len(variables)}.",
            where=source.where(count_line), hint="The file is damaged: write it again.",
        )  # fmt: skip
    points, points_line = keys.get("no. points", ("", line))
    meta = {
        _META.get(key, key): value
        for key, (value, _) in keys.items()
        if key not in ("variables", "no. variables", "no. points") and value
    }
    return Plot(
        number, meta, variables, "complex" in flags, "unpadded" in flags,
        int(points) if points.isdigit() else None, points_line, line,
    )  # fmt: skip
