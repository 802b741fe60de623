"""Values of SPICE3 raw plots: with the C reader where the lines are regular."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.sweep.bytestream import ByteStream
from gmid.sweep.readers.raw_header import Plot
from gmid.sweep.readers.raw_tokens import Body, read_tokens
from gmid.sweep.readers.rows import has_cut_number
from gmid.sweep.readers.segments import (
    ColumnStore,
    Segment,
    cut_segments,
    has_lone_return,
    parse_in_order,
    read_frame,
)
from gmid.sweep.source import TextSource, decode_line

_FEW = 1000
_MARK = b"\nTitle:"
_BEGIN = re.compile(rb"^[^\t\r\n][^\n]*", re.MULTILINE)


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
            block = self._stream.take()
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
    later segment ends; `starts` are the lines on which points begin, counted in the segment;
    `first` is the number written before the first of them.
    """

    before: NDArray[Any]
    points: NDArray[Any]
    after: NDArray[Any]
    starts: NDArray[np.int64]
    first: float
    line_count: int
    size: int


def _parse(segment: Segment, *, count: int, is_complex: bool) -> _Piece | None:
    """Read one segment; None when its lines are not regular.

    Each line is read as a row of two fields, the number of a point and a value; either may be
    void, both are on a blank line.
    """
    size = sum(map(len, segment))
    begin = _BEGIN.search(segment[0])
    is_doubled = begin is not None and b"\t\t" in begin[0]
    if is_doubled:
        segment = (b"".join(segment).replace(b"\t\t", b"\t"),)
    replaced = size - sum(map(len, segment))
    if is_complex:
        segment = tuple(block.replace(b",", b"\t") for block in segment)
    names = ["point", "real", "imaginary"][: 2 + is_complex]
    frame = read_frame(
        segment, sep="\t", names=names, dtype="float64", na_filter=True, keep_default_na=False,
        na_values=[""],
    )  # fmt: skip
    if frame is None or has_lone_return(segment):
        return None
    number, flat = frame["point"].to_numpy(), frame["real"].to_numpy()
    filled = np.isfinite(flat)
    if np.count_nonzero(np.isnan(flat)) != flat.size - np.count_nonzero(filled):
        return None
    if is_complex:
        imaginary = frame["imaginary"].to_numpy()
        if not np.array_equal(np.isfinite(imaginary), filled):
            return None
        flat = flat + 1j * imaginary
    begins = ~np.isnan(number)
    starts = np.flatnonzero(begins)
    if (is_doubled and replaced != starts.size) or (begins & ~filled).any():
        return None
    first = number[starts[0]] if starts.size else np.nan
    if not np.array_equal(number[starts], first + np.arange(starts.size)):
        return None
    split = _split_points(flat, filled, starts, count)
    lines = flat.size - (not segment[-1].endswith(b"\n"))
    return None if split is None else _Piece(*split, starts, float(first), lines, size)


def _split_points(
    flat: NDArray[Any], filled: NDArray[np.bool_], starts: NDArray[np.int64], count: int
) -> tuple[NDArray[Any], NDArray[Any], NDArray[Any]] | None:
    """Give what stands before the whole points, these, and what stands after; None if irregular.

    `flat` are the values of the lines, `filled` tells which have one, `starts` which begin a point.
    """
    if not starts.size:
        return flat[filled], np.empty((count, 0), flat.dtype), flat[:0]
    steps = np.diff(starts)
    step = int(steps[0]) if steps.size and (steps == steps[0]).all() else 0
    whole = slice(int(starts[0]), int(starts[-1]))
    if step >= count:
        taken = filled[whole].reshape(-1, step)
        if taken[:, :count].all() and not taken[:, count:].any():
            points = flat[whole].reshape(-1, step)[:, :count]
            last = flat[whole.stop :][filled[whole.stop :]]
            return flat[: whole.start][filled[: whole.start]], points.T, last
    numbers = flat[filled]
    orders = np.cumsum(filled)[starts] - 1
    head = int(orders[0])
    if not np.array_equal(orders, np.arange(head, numbers.size, count)):
        return None
    end = int(orders[-1])
    return numbers[:head], numbers[head:end].reshape(-1, count).T, numbers[end:]


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
        body = read_tokens(source, plot, _take_lines(stream), suffixes=suffixes)
    else:
        body = _read_fast(stream, plot) or _read_again(source, stream, plot, suffixes)
    plot.found_points = body.points
    return body


def _take_lines(stream: ByteStream) -> Iterator[tuple[int, str]]:
    """Iterate over the lines left of a plot, and stop before the next."""
    while line := stream.readline():
        if line.startswith(_MARK[1:]):
            stream.push_back(line)
            return
        yield stream.line + (not line.endswith(b"\n")), decode_line(line.rstrip(b"\n"))


def _read_again(source: TextSource, stream: ByteStream, plot: Plot, suffixes: str) -> Body:
    """Read token by token what the C reader did not like."""
    for _ in _take_lines(stream):
        pass
    last = plot.values_line

    def lines() -> Iterator[tuple[int, str]]:
        nonlocal last
        for number, text in source.lines(last + 1):
            if text.startswith(_MARK[1:].decode()):
                return
            last = number
            yield number, text

    body = read_tokens(source, plot, lines(), suffixes=suffixes)
    stream.line = last
    return body


def _read_fast(stream: ByteStream, plot: Plot) -> Body | None:
    """Read regular values with the C reader; None when they are not."""
    feed, count, line = _Feed(stream), len(plot.variables), stream.line + 1
    store, starts = ColumnStore(), ColumnStore()
    kind = np.complex128 if plot.is_complex else np.float64
    begun: NDArray[Any] = np.empty(0, kind)
    parse = partial(_parse, count=count, is_complex=plot.is_complex)
    for piece in parse_in_order(cut_segments(feed.read), parse):
        if piece is None or not _continues(piece, begun.size, starts.rows, count):
            feed.give_back()
            return None
        share = piece.size / stream.expected
        begun = np.concatenate((begun, piece.before))
        if piece.starts.size:
            if begun.size:
                store.append(begun[:, None], share=share / max(piece.points.shape[1], 1))
            store.append(piece.points, share=share)
            starts.append(piece.starts[None] + line, share=share)
            begun = piece.after
        line += piece.line_count
    if begun.size != count or has_cut_number(feed.tail, "\t"):
        return None
    store.append(begun[:, None], share=1.0)
    stream.line = line - feed.tail.endswith(b"\n")
    return Body(store.finish(), starts.finish()[0])


def _continues(piece: _Piece, begun: int, points: int, count: int) -> bool:
    """Tell whether a segment goes on with the point that the one before began, and counts on."""
    if not piece.starts.size:
        return begun + piece.before.size <= count * bool(begun)
    whole = begun + piece.before.size == (count if begun else 0)
    return whole and piece.first == points and piece.after.size <= count
