"""Values of SPICE3 raw plots: with the C reader where the lines are regular, else by tokens."""

from __future__ import annotations

from array import array
from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import partial
from itertools import takewhile
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault
from gmid.sweep.byte_places import count_bytes, find_bytes
from gmid.sweep.bytestream import ByteStream
from gmid.sweep.numbers import is_missing, parse_number
from gmid.sweep.readers.careful import FaultList
from gmid.sweep.readers.raw_header import Plot
from gmid.sweep.readers.rows import has_cut_number
from gmid.sweep.readers.segments import ColumnStore, cut_segments, parse_in_order, read_frame
from gmid.sweep.source import TextSource, decode_line

_FEW = 1000
_SEGMENT = 1 << 19
_MARK = b"\nTitle:"
_TAB, _LF, _CR = 9, 10, 13


@dataclass(frozen=True, eq=False)
class Body:
    """The values of a plot.

    Parameters
    ----------
    columns : list of ndarray, shape (n_points,)
        float64 or complex128, one a variable.
    lines : ndarray of int, shape (n_points,)
        Line on which each point begins.
    notes : list of str
        What is worth telling.
    """

    columns: list[NDArray[Any]]
    lines: NDArray[np.int64]
    notes: list[str] = field(default_factory=list)

    @property
    def points(self) -> int:
        """Number of points."""
        return int(self.lines.size)


class _Feed:
    """Hands out the values of one plot and stops before the next."""

    def __init__(self, stream: ByteStream) -> None:
        self._stream = stream
        self._carry = b""
        self._ended = False
        self._on_line = True
        self.tail = b""

    def read(self) -> bytes:
        """Hand out the next bytes: whole lines where the next plot may be near."""
        while not self._ended:
            block = self._stream.read()
            if block and not self._carry and b"T" not in block:
                self.tail = block if len(block) > 4096 else (self.tail + block)[-8192:]
                self._on_line = block.endswith(b"\n")
                return block
            data = self._carry + block if self._carry else block
            end = data.rfind(b"\n") + 1 if block else len(data)
            starts = self._on_line and data.startswith(_MARK[1:])
            mark = 0 if starts or b"T" not in data else data.find(_MARK) + 1
            if mark or starts:
                self._stream.push_back(data[mark:])
                data, end, self._ended = data[:mark], mark, True
            self._ended = self._ended or not block
            data, self._carry = data[:end], data[end:]
            if data:
                self._on_line = data.endswith(b"\n")
                self.tail = data if len(data) > 4096 else (self.tail + data)[-8192:]
                return data
        return b""

    def give_back(self) -> None:
        """Return what was taken from the stream and not handed out."""
        self._stream.push_back(self._carry)
        self._carry = b""


@dataclass(frozen=True, eq=False)
class _Piece:
    """The values of one segment: whole points, and what stands before and after them.

    `before` is the end of a point begun in an earlier segment, `after` the start of one that a
    later segment ends; `starts` are the lines on which points begin, counted in the segment.
    """

    before: NDArray[Any]
    points: NDArray[Any]
    after: NDArray[Any]
    starts: NDArray[np.int64]
    line_count: int
    size: int


def _find_entries(first: NDArray[np.uint8]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Find the lines with values, and which of these begin a point, by their first bytes."""
    opening = (first != _LF) & (first != _CR) & (first != _TAB)
    points = np.flatnonzero(opening[:_FEW])
    step = int(points[1] - points[0]) if points.size > 1 else 0
    if not step or not np.array_equal(first[step:], first[:-step]):
        filled = np.flatnonzero((first != _LF) & (first != _CR))
        return filled, np.flatnonzero(first[filled] != _TAB)
    once, each = _find_entries(first[:step])
    turns = -(-first.size // step)
    filled = (np.arange(turns)[:, None] * step + once).ravel()
    orders = (np.arange(turns)[:, None] * once.size + each).ravel()
    filled = filled[: np.searchsorted(filled, first.size)]
    return filled, orders[: np.searchsorted(orders, filled.size)]


def _parse(text: bytes, *, count: int, is_complex: bool) -> _Piece | None:
    """Read one segment; None when its lines are not regular."""
    size = len(text)
    letters = np.frombuffer(text, dtype=np.uint8)
    ends = find_bytes(text, _LF)
    first = letters[np.concatenate(([0], ends[: -1 if text.endswith(b"\n") else None] + 1))]
    filled, orders = _find_entries(first)
    kind = np.complex128 if is_complex else np.float64
    if not filled.size:
        empty = np.empty(0, kind)
        return _Piece(empty, np.empty((count, 0), kind), empty, orders, ends.size, size)
    parts = 2 if is_complex else 1
    tabs = count_bytes(text, _TAB)
    if tabs == filled.size + orders.size:
        text = text.replace(b"\t\t", b"\t")
    elif tabs != filled.size:
        return None
    if is_complex:
        text = text.replace(b",", b"\t")
    names = ["point", "real", "imaginary"][: parts + 1]
    frame = read_frame(text, sep="\t", names=names, usecols=names[1:], dtype="float64", quoting=3)
    if frame is None or len(frame) != filled.size:
        return None
    flat = frame["real"].to_numpy()
    if is_complex:
        flat = flat + 1j * frame["imaginary"].to_numpy()
    if not np.isfinite(flat).all():
        return None
    first_point = int(orders[0]) if orders.size else flat.size
    if not np.array_equal(orders, np.arange(first_point, flat.size, count)):
        return None
    end = first_point + (flat.size - first_point) // count * count
    points = np.ascontiguousarray(flat[first_point:end].reshape(-1, count).T)
    return _Piece(flat[:first_point], points, flat[end:], filled[orders], ends.size, size)


def read_body(source: TextSource, stream: ByteStream, plot: Plot, *, suffixes: str) -> Body:
    r"""Read the values that follow a header.

    Parameters
    ----------
    source : TextSource
        For messages, and to read again when the values are not regular.
    stream : ByteStream
        Directly behind ``Values:``; left directly before the next plot.
    plot : Plot
        The header; its number of points found is set.
    suffixes : {'spice', 'si'}
        Dialect of suffixes, should there be any.

    Returns
    -------
    Body
        The values.

    Raises
    ------
    DataFault or Faults
        If a value is missing or no number, or a point is incomplete.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> from gmid.sweep.readers.raw_header import read_header
    >>> text = (b"Title: t\nPlotname: dc\nFlags: real\nNo. Variables: 1\nNo. Points: 1\n"
    ...         b"Variables:\n\t0\tv(d)\tvoltage\nValues:\n 0\t0.5\n")
    >>> source = open_bytes(text, name="a.raw")
    >>> with source.stream() as stream:
    ...     plot = read_header(source, stream, 1)
    ...     body = read_body(source, stream, plot, suffixes="spice")
    >>> body.columns
    [array([0.5])]
    """
    if plot.is_unpadded or 0 < (plot.announced or 0) * len(plot.variables) <= _FEW:
        body = _Tokens(source, plot, suffixes).run(_take_lines(stream))
    else:
        fast = _read_fast(stream, plot)
        if fast is None:
            for _ in _take_lines(stream):
                pass
            lines = source.lines(plot.values_line + 1)
            fast = _Tokens(source, plot, suffixes).run(_until_mark(lines))
        body = fast
    plot.found_points = body.points
    return body


def _take_lines(stream: ByteStream) -> Iterator[tuple[int, str]]:
    """Iterate over the lines left of a plot, and stop before the next."""
    while line := stream.readline():
        if line.startswith(_MARK[1:]):
            stream.push_back(line)
            return
        yield stream.line + (not line.endswith(b"\n")), decode_line(line.rstrip(b"\n"))


def _until_mark(lines: Iterator[tuple[int, str]]) -> Iterator[tuple[int, str]]:
    mark = _MARK[1:].decode()
    return takewhile(lambda line: not line[1].startswith(mark), lines)


def _read_fast(stream: ByteStream, plot: Plot) -> Body | None:
    """Read regular values with the C reader; None when they are not."""
    feed, count, line = _Feed(stream), len(plot.variables), stream.line + 1
    store, starts = ColumnStore(), ColumnStore()
    open_point = np.empty(0)
    parse = partial(_parse, count=count, is_complex=plot.is_complex)
    for piece in parse_in_order(cut_segments(feed.read, size=_SEGMENT), parse):
        if piece is None or not _continues(piece, open_point.size, count):
            feed.give_back()
            return None
        share = piece.size / stream.expected
        if piece.before.size:
            open_point = np.concatenate((open_point, piece.before))
        if open_point.size == count:
            store.append(open_point[:, None], share=share / max(piece.points.shape[1], 1))
            open_point = open_point[:0]
        store.append(piece.points, share=share)
        starts.append(piece.starts[None] + line, share=share)
        open_point = piece.after if piece.after.size else open_point
        line += piece.line_count
    if not store.rows or open_point.size or has_cut_number(feed.tail, "\t"):
        return None
    return Body(store.finish(), starts.finish()[0])


def _continues(piece: _Piece, begun: int, count: int) -> bool:
    """Tell whether a segment goes on with the point that the one before began."""
    wanted = count - begun if begun else 0
    if piece.starts.size:
        return piece.before.size == wanted
    return piece.before.size <= wanted


class _Tokens:
    """The slow reading of one plot, token by token."""

    def __init__(self, source: TextSource, plot: Plot, suffixes: str) -> None:
        self._source, self._plot, self._suffixes = source, plot, suffixes
        self._values: list[array[float]] = [array("d") for _ in plot.variables]
        self._imaginary: list[array[float]] = [array("d") for _ in plot.variables]
        self._lines = array("q")
        self._faults = FaultList(source)
        self._expected: list[int] = []
        self._next = 0
        self._last_line = plot.values_line

    def run(self, lines: Iterator[tuple[int, str]]) -> Body:
        """Read the lines of the plot."""
        tail: list[str] = []
        for number, text in lines:
            if self._faults.is_full:
                break
            if text.strip():
                tail = [*tail[-29:], text]
                self._last_line = number
                self._read_line(number, text)
        if self._expected:
            name = self._plot.variables[self._expected[0]].name
            self._faults.add(
                self._last_line, f"the last point is incomplete: {len(self._expected)} of its "
                f"{len(self._plot.variables)} values are missing, from {name!r} on.",
                "The file is cut off: copy or write it again.",
            )  # fmt: skip
        elif not self._faults.any and self._is_cut(tail):
            self._faults.add(self._last_line, f"the file ends inside a number: {tail[-1]!r}.",
                             "It is cut off: copy or write it again.")  # fmt: skip
        self._faults.finish()
        return Body(self._columns(), np.array(self._lines, dtype=np.int64))

    def _read_line(self, number: int, text: str) -> None:
        words = text.replace(", ", ",").split()
        if not self._expected and text.startswith("\t"):
            self._too_many(number, words[0])
            return
        if not self._expected or (text[:1] != "\t" and len(words) > 1 and words[0].isdigit()):
            self._begin_point(number, words.pop(0))
        for word in words:
            if not self._expected:
                self._too_many(number, word)
                return
            self._read_word(number, self._expected.pop(0), word)

    def _too_many(self, number: int, word: str) -> None:
        self._faults.add(
            number, f"expected the number of the next point, found {word!r}: point "
            f"{self._next - 1} has too many values.", "The file is damaged: write it again.",
        )  # fmt: skip

    def _begin_point(self, number: int, word: str) -> None:
        """Check the index of a point and list the variables that it holds."""
        if self._expected:
            name = self._plot.variables[self._expected[0]].name
            self._faults.add(
                number, f"a new point begins while point {self._next - 1} still lacks "
                f"{name!r}.", "The file is damaged: write it again.",
            )  # fmt: skip
        index = self._next
        if word != str(index):
            self._faults.add(
                number, f"expected point {index}, found {word!r}.",
                "Points are missing or doubled: write the file again.",
            )  # fmt: skip
        self._next = int(word) + 1 if word.isdigit() and len(word) < 10 else index + 1
        self._lines.append(number)
        self._expected = [
            position for position, variable in enumerate(self._plot.variables)
            if not self._plot.is_unpadded or variable.size is None or index < variable.size
        ]  # fmt: skip

    def _read_word(self, number: int, position: int, word: str) -> None:
        parts = word.strip("()").split(",") if self._plot.is_complex else [word]
        name = self._plot.variables[position].name
        if len(parts) != (2 if self._plot.is_complex else 1):
            self._faults.add(number, f"expected 're,im' for {name!r}, found {word!r}.",
                             "The file is damaged: write it again.")  # fmt: skip
            return
        for target, part in zip((self._values, self._imaginary), parts, strict=False):
            try:
                target[position].append(parse_number(part, suffixes=self._suffixes))
            except DataFault:
                what = "the value is missing" if is_missing(part) else "expected a number"
                self._faults.add(number, f"{what} for {name!r}: found {part!r}.",
                                 "Simulate this point again.")  # fmt: skip

    def _is_cut(self, tail: list[str]) -> bool:
        """Tell whether the file ends inside a number of this plot."""
        if not has_cut_number("\n".join(tail).encode(), None):
            return False
        with self._source.stream() as stream:
            while stream.read():
                pass
            return decode_line(stream.tail.rsplit(b"\n", 1)[-1]) == tail[-1]

    def _columns(self) -> list[NDArray[Any]]:
        """Columns of full length; constants keep their one value for all points."""
        columns: list[NDArray[Any]] = []
        for real, imaginary in zip(self._values, self._imaginary, strict=True):
            values: NDArray[Any] = np.array(real)
            if self._plot.is_complex:
                values = values + 1j * np.array(imaginary)
            columns.append(values)
        return columns
