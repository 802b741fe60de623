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

SEGMENT = 1 << 20
"""Small enough for the reader's words of a segment to stay in the processor's cache."""
_MOST_WORKERS = 4
_SPARE, _MOST_ROWS = 64, 1 << 27
_AHEAD = 4
"""Segments read for each thread before the oldest result is waited for."""
T = TypeVar("T")


class _Handle:
    """A text in memory as the C reader wants it: handed out whole, without a copy."""

    mode = "r"

    def __init__(self, text: bytes) -> None:
        self._text = text

    def read(self, size: int = -1) -> bytes:
        text, self._text = self._text, b""
        return text

    def __iter__(self) -> Iterator[bytes]:
        return iter(self.read, b"")


def read_frame(text: bytes, **options: Any) -> Any | None:
    r"""Read rows in memory with the C reader of pandas.

    Parameters
    ----------
    text : bytes
        Whole lines without a header.
    **options
        For ``pandas.read_csv``.

    Returns
    -------
    DataFrame or None
        None when any word or row is not as the options say.

    Examples
    --------
    >>> read_frame(b"1,2\n3,x\n", names=[0, 1], dtype="float64") is None
    True
    """
    import pandas as pd

    try:
        return pd.read_csv(  # type: ignore[call-overload]
            _Handle(text), header=None, engine="c", na_filter=False, low_memory=False, **options
        )
    except ValueError:
        return None


def cut_segments(read: Callable[[], bytes], *, size: int = SEGMENT) -> Iterator[bytes]:
    r"""Cut blocks into segments that end with a line.

    Parameters
    ----------
    read : callable
        Gives the next block, empty at the end.
    size : int
        Least size of a segment in bytes, but for the last.

    Yields
    ------
    bytes
        Whole lines; the last segment may lack its line feed.

    Examples
    --------
    >>> blocks = iter([b"ab\nc", b"d\n", b""])
    >>> list(cut_segments(lambda: next(blocks), size=1))
    [b'ab\n', b'cd\n']
    """
    parts: list[bytes] = []
    total = 0
    while block := read():
        begin = 0
        while cut := block.find(b"\n", max(begin, begin + size - total - 1)) + 1:
            yield b"".join((*parts, block[begin:cut]))
            parts, total, begin = [], 0, cut
        if begin < len(block):
            parts.append(block[begin:])
            total += len(block) - begin
    if parts:
        yield b"".join(parts)


def parse_in_order(segments: Iterator[bytes], parse: Callable[[bytes], T]) -> Iterator[T]:
    """Parse segments in threads and give the results in their order.

    Parameters
    ----------
    segments : iterator of bytes
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


def _count_workers() -> int:
    if hasattr(os, "sched_getaffinity"):
        return min(len(os.sched_getaffinity(0)), _MOST_WORKERS)
    return min(os.cpu_count() or 1, _MOST_WORKERS)
