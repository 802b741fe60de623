"""Finds the table in the head of a text: separator, header, units, first row, kinds of column."""

from __future__ import annotations

import csv
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from gmid.errors import DataFault
from gmid.sweep.numbers import is_missing, is_number
from gmid.sweep.readers.cells import is_comment, split_cells
from gmid.sweep.readers.headers import is_unit, join_units, split_head, strip_brackets
from gmid.sweep.source import TextSource

_SAMPLE = 60
_COMMA_NUMBER = re.compile(r"[+-]?\d*,\d+(?:[eEdD][+-]?\d+)?\w*")
_FORTRAN = re.compile(r"[+-]?(?:\d+[.,]?\d*|[.,]\d+)[dD][+-]?\d+")
_RULER = re.compile(
    r"[-=_+|]{2,}|[-=_+|]{3,}(?:\s+[-=_+|]{3,})*|[|+]?(?:\s*:?[-=]{2,}:?\s*[|+])+(?:\s*:?[-=]{2,}:?)?"
)
_QUOTED = re.compile(r"'([^']+)'")


class HeaderMissing(DataFault):
    """A table without names of its columns, of which there are `width`."""

    def __init__(self, message: str, *, where: str, hint: str, width: int) -> None:
        super().__init__(message, where=where, hint=hint)
        self.width = width


@dataclass(frozen=True)
class Line:
    """One line of the head, split into cells.

    Parameters
    ----------
    number : int
        Line number, from 1.
    cells : tuple of str
        Stripped fields.
    commented : bool
        Whether a comment sign stood before them.
    kinds : str
        One letter a cell: ``n`` number, ``m`` missing, ``t`` text.
    """

    number: int
    cells: tuple[str, ...]
    commented: bool
    kinds: str

    @property
    def is_words(self) -> bool:
        """Whether it holds words alone, as a header does."""
        return "n" not in self.kinds and "t" in self.kinds


@dataclass(frozen=True)
class Shape:
    """How the rows of a table are written.

    Parameters
    ----------
    separator : str or None
        None for blanks.
    fields : int
        Fields on each row, an empty one after a trailing separator included.
    first_line : int
        Line on which rows begin.
    header : Line or None
        Line of names.
    units : tuple of str or None
        From a line of units.
    text : frozenset of int
        Columns of words.
    void : frozenset of int
        Columns without a value on any of the first rows, of which there are several.
    trailing : bool
        Whether every row ends in a separator.
    decimal_comma, fortran : bool
        How numbers are written.
    comments : tuple of str
        Comment lines before the table.
    titles : tuple of str
        Other lines before the table.
    """

    separator: str | None
    fields: int
    first_line: int
    header: Line | None = None
    units: tuple[str, ...] | None = None
    text: frozenset[int] = frozenset()
    void: frozenset[int] = frozenset()
    trailing: bool = False
    decimal_comma: bool = False
    fortran: bool = False
    comments: tuple[str, ...] = ()
    titles: tuple[str, ...] = ()

    @property
    def width(self) -> int:
        """Number of columns."""
        return self.fields - self.trailing


def scan_lines(lines: Sequence[str], separator: str | None, *, suffixes: str) -> Shape | None:
    """Find the table in the first lines of a file.

    Parameters
    ----------
    lines : sequence of str
        From the first line on.
    separator : str or None
        None for blanks.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    Shape or None
        None when no row of numbers is there.  The header is as found; whether it suits the rows
        is for `settle_header`.

    Examples
    --------
    >>> shape = scan_lines(["vgs,id", "0,1e-12", "0.1,1e-11"], ",", suffixes="si")
    >>> shape.fields, shape.first_line, shape.header.cells
    (2, 2, ('vgs', 'id'))
    """
    found = _classify(lines, separator, suffixes)
    rows = [line for line in found if not line.commented and "n" in line.kinds]
    if not rows:
        return None
    fields = Counter(len(line.cells) for line in rows).most_common(1)[0][0]
    sample = _leave_preamble([line for line in rows if len(line.cells) == fields], found)
    before = [line for line in found if line.number < sample[0].number]
    header, units = _find_header(before, fields)
    first = _first_row(found, sample[0], header, units)
    counts = [Counter(line.kinds[j] for line in sample) for j in range(fields)]
    text = frozenset(j for j, count in enumerate(counts) if count["t"] > count["n"])
    words = [cell for line in sample for j, cell in enumerate(line.cells) if j not in text]
    trailing = separator is not None and not any(line.cells[-1] for line in sample)
    if trailing and header is not None and len(header.cells) == fields and header.cells[-1]:
        trailing = False
    void = (
        j for j in range(fields - trailing) if len(sample) > 1 and counts[j]["m"] == len(sample)
    )
    used = {line.number for line in (header, units) if line is not None}
    others = [line for line in before if line.number not in used]
    return Shape(
        separator, fields, first, header=header,
        units=None if units is None else tuple(map(strip_brackets, units.cells)),
        text=text, void=frozenset(void), trailing=trailing,
        decimal_comma=separator != "," and any(map(_COMMA_NUMBER.fullmatch, words)),
        fortran=any(map(_FORTRAN.fullmatch, words)),
        comments=tuple(lines[line.number - 1].strip() for line in others if line.commented),
        titles=tuple(lines[line.number - 1].strip() for line in others if not line.commented),
    )  # fmt: skip


def settle_header(
    source: TextSource, shape: Shape, columns: Sequence[str] | None
) -> tuple[list[str], Shape]:
    r"""Decide on the names of the columns.

    Parameters
    ----------
    source : TextSource
        For messages.
    shape : Shape
        From `scan_lines`.
    columns : sequence of str, optional
        Names given by the user, which win over the file's own.

    Returns
    -------
    tuple of (list of str, Shape)
        One head a column as spelled, and the shape with a trailing separator accounted for.

    Raises
    ------
    DataFault
        If there is no header, or it does not match the rows.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> source = open_bytes(b"vgs,id\n0.5,1.0\n", name="a.csv")
    >>> shape = scan_lines(source.head_lines(), ",", suffixes="si")
    >>> settle_header(source, shape, None)[0]
    ['vgs', 'id']
    """
    if columns is not None:
        return list(columns), shape
    header = shape.header
    if header is None:
        raise HeaderMissing(
            f"the {shape.width} columns have no header.", where=source.where(shape.first_line),
            hint="List their names in the recipe: columns = [...], from left to right.",
            width=shape.width,
        )  # fmt: skip
    cells = _leave_quotes(source, header, shape)
    if shape.separator is None:
        cells = join_units(cells, shape.width)
    elif len(cells) == shape.width + 1 and not cells[-1]:
        cells.pop()
    if len(cells) != shape.width:
        raise DataFault(
            f"expected {len(cells)} columns as in the header (line {header.number}), "
            f"found {shape.width}.", where=source.where(shape.first_line),
            hint=_mismatch_hint(shape, len(cells), header.number),
        )  # fmt: skip
    for position, cell in enumerate(cells):
        if not cell and position not in shape.void:
            raise DataFault(
                f"column {position + 1} has no name in the header.",
                where=source.where(header.number), hint="Name it, or list columns = [...].",
            )  # fmt: skip
    return cells, shape


def _leave_quotes(source: TextSource, header: Line, shape: Shape) -> list[str]:
    """Give the cells of a header without single quotes around them; separators may be inside."""
    text = source.head_lines()[header.number - 1]
    if shape.separator is not None and len(header.cells) > shape.width and "'" in text:
        body = text.lstrip().lstrip("#*!;%") if header.commented else text
        whole = [cell.strip() for cell in next(csv.reader(
            [body.replace("\r", " ")], delimiter=shape.separator, quotechar="'",
            skipinitialspace=True,
        ))]  # fmt: skip
        if len(whole) == shape.width:
            return whole
    matches = [_QUOTED.fullmatch(cell) for cell in header.cells]
    return [
        cell if match is None else match[1].strip()
        for cell, match in zip(header.cells, matches, strict=True)
    ]


def name_columns(heads: Sequence[str], units: Sequence[str] | None) -> list[tuple[str, str | None]]:
    """Split the heads into names and units.

    Parameters
    ----------
    heads : sequence of str
        As spelled.
    units : sequence of str, optional
        From a line of their own; these win.

    Returns
    -------
    list of tuple of (str, str or None)
        Name and unit of each column.

    Examples
    --------
    >>> name_columns(["vgs", "id"], ["V", "uA"])
    [('vgs', 'V'), ('id', 'uA')]
    """
    if units is None:
        return [split_head(head) for head in heads]
    return [(head, unit or None) for head, unit in zip(heads, units, strict=False)]


def _classify(lines: Sequence[str], separator: str | None, suffixes: str) -> list[Line]:
    found: list[Line] = []
    rows = 0
    for number, text in enumerate(lines, 1):
        if rows >= _SAMPLE:
            break
        if not text.strip() or _RULER.fullmatch(text.strip()):
            continue
        commented = is_comment(text, separator)
        body = text.lstrip().lstrip("#*!;%") if commented else text
        cells = tuple(split_cells(body, separator))
        found.append(Line(number, cells, commented, "".join(_kind(c, suffixes) for c in cells)))
        rows += not commented and "n" in found[-1].kinds
    return found


def _kind(cell: str, suffixes: str) -> str:
    if is_missing(cell):
        return "m"
    word = cell.replace(",", ".") if _COMMA_NUMBER.fullmatch(cell) else cell
    return "n" if is_number(word, suffixes=suffixes) else "t"


def _leave_preamble(sample: list[Line], found: Sequence[Line]) -> list[Line]:
    """Leave out lines such as ``version,1.0``: as wide as the rows, but above the header."""
    usual = Counter(line.kinds for line in sample).most_common(1)[0][0]
    heads = [line.number for line in found if line.is_words and not line.commented
             and len(line.cells) == len(usual)]  # fmt: skip
    odd = 0
    for line in sample:
        if all(kind != "t" or then == "t" for kind, then in zip(line.kinds, usual, strict=True)):
            break
        odd += 1
    beneath = odd < len(sample) and odd and any(
        sample[odd - 1].number < number < sample[odd].number for number in heads
    )  # fmt: skip
    return sample[odd:] if beneath else sample


def _find_header(before: Sequence[Line], fields: int) -> tuple[Line | None, Line | None]:
    """Pick header and line of units among the lines before the first row."""
    plain = [line for line in reversed(before) if line.is_words and not line.commented]
    if not plain:
        plain = [line for line in reversed(before) if line.is_words and len(line.cells) == fields]
    if not plain:
        return None, None
    last = plain[0]
    if len(plain) > 1 and _is_units(last, fields) and len(plain[1].cells) == len(last.cells):
        return plain[1], last
    above = [line for line in before if line.number < last.number and line.commented]
    if not last.commented and _is_units(last, fields) and above and above[-1].is_words:
        return above[-1], last
    return last, None


def _is_units(line: Line, fields: int) -> bool:
    """Tell whether every cell is a unit or empty, and most are units."""
    words = [strip_brackets(cell) for cell in line.cells]
    return len(words) >= fields and all(not word or is_unit(word) for word in words)


def _first_row(found: Sequence[Line], first: Line, header: Line | None, units: Line | None) -> int:
    """Line from which every line must be a row: wrong ones must not hide as a preamble."""
    plain = [line for line in found if not line.commented and line.number <= first.number]
    if header is not None and not header.commented:
        last = max(header.number, units.number if units is not None else 0)
        return next(line.number for line in plain if line.number > last)
    start = first.number
    for line in reversed(plain[:-1]):
        below = header is not None and line.number > header.number and "n" in line.kinds
        if "t" in line.kinds and not below:
            break
        start = line.number
    return start


def _mismatch_hint(shape: Shape, names: int, header_line: int) -> str:
    if shape.separator == "," and names < shape.fields <= 2 * names:
        return (
            "Decimal commas cannot be told from commas that separate: write the file with ';' "
            "or TAB between the columns, or with decimal points."
        )
    return (
        f"If line {header_line} is no header, list the names in the recipe: columns = [...]; "
        "otherwise write one name for each column."
    )
