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

SEGMENT = 1 << 19
_MOST_WORKERS = 4
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
    r"""Gather blocks into segments that end with a line.

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
        cut = block.rfind(b"\n") + 1
        if cut and total + cut >= size:
            yield b"".join((*parts, block[:cut]))
            parts, total = [], 0
            block = block[cut:]
        if block:
            parts.append(block)
            total += len(block)
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
    workers = min(len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity")
                  else os.cpu_count() or 1, _MOST_WORKERS)  # fmt: skip
    with ExitStack() as stack:
        pool = stack.enter_context(ThreadPoolExecutor(workers))
        waiting: deque[Future[T]] = deque((pool.submit(parse, first), pool.submit(parse, second)))
        stack.callback(lambda: [future.cancel() for future in waiting])
        for segment in segments:
            waiting.append(pool.submit(parse, segment))
            if len(waiting) > workers:
                yield waiting.popleft().result()
        while waiting:
            yield waiting.popleft().result()


class GrowingArray:
    """One column that grows at its end, in place where the memory allows.

    Examples
    --------
    >>> column = GrowingArray()
    >>> column.append(np.array([1.0]))
    >>> column.append(np.array([2.0, 3.0]))
    >>> column.finish().tolist()
    [1.0, 2.0, 3.0]
    """

    def __init__(self) -> None:
        self._values: NDArray[Any] = np.empty(0)
        self._words: list[NDArray[Any]] = []
        self.size = 0

    def append(self, values: NDArray[Any]) -> None:
        """Copy values to the end.

        Parameters
        ----------
        values : ndarray, shape (n,)
            All of one kind; may be a view.
        """
        if values.dtype.kind == "U":
            self._words.append(values)
            return
        if self.size == 0:
            self._values = np.empty(0, values.dtype)
        size = self.size + values.size
        if size > self._values.size:
            room = max(size, self._values.size + self._values.size // 8)
            self._values.resize(room, refcheck=False)
        self._values[self.size : size] = values
        self.size = size

    def finish(self) -> NDArray[Any]:
        """Give the column and forget it.

        Returns
        -------
        ndarray, shape (n,)
            All that was appended.
        """
        if self._words:
            return np.concatenate(self._words)
        values, self._values = self._values, np.empty(0)
        values.resize(self.size, refcheck=False)
        return values
