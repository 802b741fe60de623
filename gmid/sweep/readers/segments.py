"""Parses a long text in segments of whole lines, several at a time, in order.

The C reader of pandas lets go of the interpreter lock while it works, so that threads share
the load while the main thread reads, unpacks and checks the next bytes.
"""

from __future__ import annotations

import os
from collections import deque
from collections.abc import Callable, Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from contextlib import ExitStack
from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

from gmid.sweep.byte_places import count_bytes

SEGMENT = 1 << 20
"""Small enough for the reader's words of a segment to stay in the processor's cache."""
_MOST_WORKERS = 4
_SPARE, _MOST_ROWS = 64, 1 << 27
_LARGE = 31 << 20
"""Just below the largest piece for which the C library adapts its bounds."""
_AHEAD = 2
"""Segments read for each thread before the oldest result is waited for."""
S = TypeVar("S")
T = TypeVar("T")
Segment = tuple[bytes, ...]
"""Whole lines in blocks, none of which is empty; only together do they end with a line."""


class _Handle:
    """A segment as the C reader wants it: handed out block by block, without a copy."""

    mode = "r"

    def __init__(self, segment: Segment) -> None:
        self._blocks = iter(segment)

    def read(self, size: int = -1) -> bytes:
        return next(self._blocks, b"")

    def __iter__(self) -> Iterator[bytes]:
        return self._blocks


def read_frame(segment: Segment, **options: Any) -> Any | None:
    r"""Read rows in memory with the C reader of pandas.

    Parameters
    ----------
    segment : tuple of bytes
        Whole lines without a header.
    **options
        For ``pandas.read_csv``; by default nothing marks a missing value, quotes are letters and a
        blank line is a row.

    Returns
    -------
    DataFrame or None
        None when any word or row is not as the options say.  A first row that is too long
        would make an index, others are refused.

    Examples
    --------
    >>> read_frame((b"1,2\n3", b",4\n"), names=[0, 1], dtype="float64")[1].tolist()
    [2.0, 4.0]
    >>> read_frame((b"1,2\n3,x\n",), names=[0, 1], dtype="float64") is None
    True
    """
    import pandas as pd

    try:
        frame = pd.read_csv(  # type: ignore[call-overload]
            _Handle(segment), header=None, engine="c", low_memory=False,
            **{"na_filter": False, "quoting": 3, "skip_blank_lines": False, **options},
        )  # fmt: skip
    except ValueError:
        return None
    return frame if isinstance(frame.index, pd.RangeIndex) else None


def has_lone_return(segment: Segment) -> bool:
    r"""Tell whether carriage returns stand where no line feed follows, which may end lines.

    Parameters
    ----------
    segment : tuple of bytes
        Whole lines.

    Returns
    -------
    bool
        True when there is such a one.

    Examples
    --------
    >>> has_lone_return((b"1\r\n2\r", b"\n")), has_lone_return((b"1\r2\n",))
    (False, True)
    """
    if not any(b"\r" in block for block in segment):
        return False
    text = b"".join(segment)
    return count_bytes(text, ord("\r")) != text.count(b"\r\n")


def cut_segments(read: Callable[[], bytes], *, size: int = SEGMENT) -> Iterator[Segment]:
    r"""Group blocks to segments that end with a line.

    Parameters
    ----------
    read : callable
        Gives the next block, empty at the end.
    size : int
        Least size of a segment in bytes, but for the last.

    Yields
    ------
    tuple of bytes
        Whole lines; the last segment may lack its line feed.

    Examples
    --------
    >>> blocks = iter([b"ab\nc", b"d\n", b""])
    >>> list(cut_segments(lambda: next(blocks), size=1))
    [(b'ab\n',), (b'c', b'd\n')]
    """
    blocks: list[bytes] = []
    total = 0
    while block := read():
        blocks.append(block)
        total += len(block)
        cut = block.rfind(b"\n") + 1 if total >= size else 0
        if cut:
            blocks[-1] = block[:cut]
            yield tuple(blocks)
            total = len(block) - cut
            blocks = [block[cut:]] if total else []
    if blocks:
        yield tuple(blocks)


def parse_in_order(segments: Iterator[S], parse: Callable[[S], T]) -> Iterator[T]:
    """Parse segments in threads and give the results in their order.

    Parameters
    ----------
    segments : iterator
        Read in this thread, a few ahead of the results.
    parse : callable
        Called with a segment.

    Yields
    ------
    object
        What `parse` gives for each segment.

    Examples
    --------
    >>> list(parse_in_order(iter([b"a", b"bcd"]), len))
    [1, 3]
    """
    first = next(segments, None)
    if first is None:
        return
    second = next(segments, None)
    if second is None:
        yield parse(first)
        return
    workers = _count_workers()
    _keep_freed_memory()
    with ExitStack() as stack:
        pool = stack.enter_context(ThreadPoolExecutor(workers))
        waiting: deque[Future[T]] = deque((pool.submit(parse, first), pool.submit(parse, second)))
        stack.callback(lambda: [future.cancel() for future in waiting])
        for segment in segments:
            waiting.append(pool.submit(parse, segment))
            if len(waiting) > _AHEAD * workers:
                yield waiting.popleft().result()
        while waiting:
            yield waiting.popleft().result()


class ColumnStore:
    """Columns that grow piece by piece, in room that is taken at once where their end is foreseen.

    Examples
    --------
    >>> store = ColumnStore()
    >>> store.append(np.array([[1.0]]), share=0.3)
    >>> store.append(np.array([[2.0, 3.0]]), share=0.7)
    >>> [column.tolist() for column in store.finish()]
    [[1.0, 2.0, 3.0]]
    """

    def __init__(self) -> None:
        self._block: NDArray[Any] = np.empty((0, 0))
        self.rows = 0

    def append(self, block: NDArray[Any], *, share: float) -> None:
        """Copy a piece to the end.

        Parameters
        ----------
        block : ndarray, shape (n_columns, n_rows)
            The same kind of numbers and number of columns each time.
        share : float, keyword-only
            Part of the whole text that it was read from, as far as is known.
        """
        rows = self.rows + block.shape[1]
        if rows == self.rows:
            return
        if rows > self._block.shape[1]:
            foreseen = int(1.02 * block.shape[1] / min(max(share, 1e-9), 1.0)) + _SPARE
            more = self._block.shape[1] * 3 // 2
            room = np.empty((block.shape[0], max(rows, more or min(foreseen, _MOST_ROWS))),
                            dtype=block.dtype)  # fmt: skip
            if self.rows:
                room[:, : self.rows] = self._block[:, : self.rows]
            self._block = room
        self._block[:, self.rows : rows] = block
        self.rows = rows

    def finish(self) -> list[NDArray[Any]]:
        """Give the columns.

        Returns
        -------
        list of ndarray, shape (n_rows,)
            All that was appended.
        """
        return list(self._block[:, : self.rows])


def _keep_freed_memory() -> None:
    """Have the allocator keep what is freed between segments instead of faulting it in again.

    The usual C library gives freed memory back above a bound, which rises to twice the largest
    single piece that was ever freed; without this a third of the time may go into page faults.
    The piece itself is never touched.
    """
    np.empty(_LARGE, dtype=np.uint8)


def _count_workers() -> int:
    if hasattr(os, "sched_getaffinity"):
        return min(len(os.sched_getaffinity(0)), _MOST_WORKERS)
    return min(os.cpu_count() or 1, _MOST_WORKERS)
