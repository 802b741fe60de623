"""Reads the rows of a table: fast with the C reader, and slowly with care when that fails.

The fast way takes plain floats only and lets nothing doubtful pass; whatever it does not
like is read again line by line, which either understands it (suffixes, comments between
rows) or names every line at fault.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.sweep.byte_places import count_bytes
from gmid.sweep.numbers import is_missing
from gmid.sweep.readers.scan import Shape
from gmid.sweep.readers.segments import (
    ColumnStore,
    Segment,
    cut_segments,
    has_lone_return,
    parse_in_order,
    read_frame,
)
from gmid.sweep.source import TextSource

_FORTRAN = bytes.maketrans(b"dD", b"eE")
_LAST_NUMBER = re.compile(rb"[+-]?(\d*)[.,]?(\d*)(?:[eEdD][+-]?(\d*))?$")


@dataclass(frozen=True, eq=False)
class Rows:
    """The values of a table, column by column.

    Parameters
    ----------
    values : list of ndarray, shape (n_rows,)
        float64, or str for columns of words.
    first_line : int
        Line of the first row.
    lines : ndarray of int, shape (n_rows,), optional
        Line of each row, where they do not follow each other.
    notes : list of str
        What was read in one way though another is possible.
    """

    values: list[NDArray[Any]]
    first_line: int
    lines: NDArray[np.int64] | None = None
    notes: list[str] = field(default_factory=list)


def read_rows_fast(source: TextSource, shape: Shape) -> Rows | None:
    r"""Read plain rows with the C reader.

    Parameters
    ----------
    source : TextSource
        The file.
    shape : Shape
        How the rows are written.

    Returns
    -------
    Rows or None
        None when anything is not as it should be; then `careful.read_rows_slowly` knows more.

    Raises
    ------
    DataFault
        If the stream itself is at fault.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> from gmid.sweep.readers.scan import scan_lines
    >>> source = open_bytes(b"vgs,id\n0.5,1.0\n0.6,2.0\n", name="a.csv")
    >>> shape = scan_lines(source.head_lines(), ",", suffixes="si")
    >>> read_rows_fast(source, shape).values
    [array([0.5, 0.6]), array([1., 2.])]
    """
    if (shape.decimal_comma or shape.fortran) and shape.text:
        return None
    store = ColumnStore()
    words: list[list[NDArray[np.str_]]] = [[] for _ in shape.text]
    parse = partial(_parse, shape=shape, options=_options(shape))
    in_step, blank_end = True, False
    with source.stream() as stream:
        while stream.line < shape.first_line - 1:
            if not stream.readline():
                return None
        for piece in parse_in_order(cut_segments(stream.take), parse):
            if piece is None:
                return None
            in_step &= piece.in_step and not (blank_end and piece.numbers.shape[1])
            blank_end |= piece.blank_end
            store.append(piece.numbers, share=piece.size / stream.expected)
            for column, found in zip(words, piece.words, strict=True):
                column.append(found)
        count = store.rows
        if count == 0 or has_cut_number(stream.tail, shape.separator):
            return None
    lines = None
    if not in_step:
        occupied = [number for number, text in source.lines(shape.first_line) if text.strip()]
        if len(occupied) != count:
            return None
        lines = np.array(occupied, dtype=np.int64)
    first = shape.first_line if lines is None else int(lines[0])
    values: dict[int, NDArray[Any]] = {
        place: np.concatenate(column)
        for place, column in zip(sorted(shape.text), words, strict=True)
    }
    values |= {place: np.broadcast_to(np.nan, count) for place in shape.void}
    plain = iter(store.finish())
    return Rows(
        [values[j] if j in values else next(plain) for j in range(shape.width)], first, lines
    )


def has_cut_number(tail: bytes, separator: str | None) -> bool:
    r"""Tell whether a text seems to end inside a number.

    Parameters
    ----------
    tail : bytes
        The end of the text, several rows if there are as many.
    separator : str or None
        What separates columns, None for blanks.

    Returns
    -------
    bool
        True when there is no line feed at the end and the last number has fewer digits than
        all those above it, which agree among themselves, or an exponent shorter than theirs.

    Examples
    --------
    >>> has_cut_number(b"1.25e-06\n1.50e-06\n1.75e-0", None)
    True
    >>> has_cut_number(b"1.25e-06\n1.5e-06", None)
    False
    """
    if not tail.strip() or tail.endswith((b"\n", b"\r")):
        return False
    lines = [line for line in tail.splitlines()[-30:] if line.strip()]
    mark = None if separator is None else separator.encode()
    words = [line.rstrip().split(mark)[-1].strip(b' "') for line in lines]
    matches = [_LAST_NUMBER.match(word) for word in words]
    shapes = [None if match is None else tuple(map(_length, match.groups())) for match in matches]
    last, above = shapes[-1], [shape for shape in shapes[1:-1] if shape is not None]
    if last is None or not above:
        return False
    exponents = {shape[2] for shape in above}
    if len(exponents) == 1 and last[2] < min(exponents):
        return True
    return len(above) > 2 and len({shape[1:] for shape in above}) == 1 and last[1:] < above[0][1:]


def _length(group: bytes | None) -> int:
    return -1 if group is None else len(group)


def _options(shape: Shape) -> dict[str, Any]:
    """Options of the C reader for a shape."""
    kinds: Any = "float64"
    words = shape.text | shape.void | ({shape.fields - 1} if shape.trailing else set())
    if words:
        kinds = {j: "category" if j in words else "float64" for j in range(shape.fields)}
    return {
        "sep": r"\s+" if shape.separator is None else shape.separator,
        "names": list(range(shape.fields)),
        "dtype": kinds,
    }


@dataclass(frozen=True, eq=False)
class _Piece:
    """Rows of one segment: the columns of numbers, those of words, and its size in bytes.

    `blank_end` tells that nothing but blank lines stands behind the last row, `in_step` that each
    line before is one row.
    """

    numbers: NDArray[np.float64]
    words: list[NDArray[np.str_]]
    size: int
    in_step: bool = True
    blank_end: bool = False


def _parse(segment: Segment, *, shape: Shape, options: dict[str, Any]) -> _Piece | None:
    """Read one segment; None when a row or value is not plain."""
    size = sum(map(len, segment))
    if shape.decimal_comma:
        if any(b"." in block for block in segment):
            return None
        segment = tuple(block.replace(b",", b".") for block in segment)
    if shape.fortran:
        segment = tuple(block.translate(_FORTRAN) for block in segment)
    if all(map(bytes.isspace, segment)):
        empty = np.empty((shape.width - len(shape.text | shape.void), 0))
        return _Piece(empty, [np.empty(0, str)] * len(shape.text), size, blank_end=True)
    may_quote = shape.separator is not None
    is_quoted = (
        may_quote and bool(shape.text | shape.void) and any(b'"' in block for block in segment)
    )
    frame = None if is_quoted else read_frame(segment, **options)
    in_step, blank_end = not has_lone_return(segment), False
    if frame is None:
        frame, in_step, blank_end = _read_lines(b"".join(segment), options, may_quote=may_quote)
    if frame is None:
        return None
    words = []
    for j in sorted(shape.text):
        kinds = np.char.strip(np.asarray(frame[j].cat.categories, dtype=str))
        if (kinds == "").any():
            return None
        words.append(kinds[frame[j].cat.codes.to_numpy()])
    if shape.trailing and any(frame[shape.fields - 1].cat.categories != ""):
        return None
    for j in shape.void:
        if not all(map(is_missing, map(str, frame[j].cat.categories))):
            return None
    other = shape.text | shape.void
    plain = [j for j in range(shape.width) if j not in other]
    if not plain:
        return None
    numbers = (frame if len(plain) == shape.fields else frame[plain]).to_numpy().T
    return _Piece(numbers, words, size, in_step, blank_end) if np.isfinite(numbers).all() else None


def _read_lines(text: bytes, options: dict[str, Any], *, may_quote: bool) -> tuple[Any, bool, bool]:
    """Read rows among which are quotes or blank lines.

    Tells besides whether each line is a row, and whether blank lines end the text.
    """
    rows = text[: text.find(b"\n", len(text.rstrip())) + 1] or text
    blank_end = len(rows) < len(text)
    if may_quote and b'"' in rows:
        options = {**options, "quoting": 0}
    frame = read_frame((rows,), **options)
    if frame is None:
        return read_frame((rows,), skip_blank_lines=True, **options), False, blank_end
    in_step = len(frame) == count_bytes(rows) + (not rows.endswith(b"\n"))
    return frame, in_step, blank_end
