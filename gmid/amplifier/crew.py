"""Processes that evaluate parts of a batch side by side, one a core.

They are forked when everything that they read is there, so nothing of it is copied. What they
answer is what this process would have answered: how a batch is parted does not depend on them.
"""

from __future__ import annotations

import multiprocessing
import os
import signal
import sys
import threading
import time
import warnings
from collections.abc import Callable, Sequence
from concurrent.futures import ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from typing import Any

from gmid.errors import NoSolution

Work = Callable[[Any, Any], Any]
"""From what all jobs share, and one job, to its answer; a function of a module."""

_MOST = 8
_SHARED: list[Any] = []
_WATCH = 1.0


def count_processes() -> int:
    """Tell how many processes are worth having: one a core this one may use, if it may fork.

    Returns
    -------
    int
        1 where there is no second core, on systems whose processes are not forked, and inside a
        process that may have no children.

    Examples
    --------
    >>> count_processes() >= 1
    True
    """
    if sys.platform != "linux" or multiprocessing.current_process().daemon:
        return 1
    return min(len(os.sched_getaffinity(0)), _MOST)


class Crew:
    """A few processes that read the same things.

    Parameters
    ----------
    shared : object
        What all jobs read, as it is at the first use; it does not travel.
    size : int, optional
        How many processes; `count_processes` by default. With one, this process works itself.

    Examples
    --------
    >>> from operator import mul
    >>> with Crew(3, size=1) as crew:
    ...     crew.run(mul, [1, 2])
    [3, 6]
    """

    def __init__(self, shared: Any, *, size: int | None = None) -> None:
        self.size = count_processes() if size is None else size
        self._shared = shared
        self._owner = os.getpid()
        self._pool: ProcessPoolExecutor | None = None

    def __enter__(self) -> Crew:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """End the processes; this one does the work from now on."""
        self.size = 1
        if self._pool is not None:
            self._pool.shutdown(cancel_futures=True)
            self._pool = None

    def run(self, work: Work, jobs: Sequence[Any]) -> list[Any]:
        """Do jobs.

        Parameters
        ----------
        work : callable
            What is to be done.
        jobs : sequence
            They and their answers are pickled, unless this process does them, as it does where
            it is itself one of a crew.

        Returns
        -------
        list
            Answers in the order of the jobs.

        Raises
        ------
        NoSolution
            If a process ended before its answer came.
        """
        if self.size < 2 or len(jobs) < 2 or os.getpid() != self._owner:
            return [work(self._shared, job) for job in jobs]
        try:
            return list(self._open().map(_answer, [work] * len(jobs), jobs))
        except BrokenProcessPool:
            self.close()
            raise NoSolution(
                "a process of the search was ended from outside before it answered.",
                hint="There may be too little memory; with one core (taskset -c 0) it needs less.",
            ) from None

    def _open(self) -> ProcessPoolExecutor:
        """Fork, at the first use; threads of this process do nothing that the others need."""
        if self._pool is None:
            _SHARED[:] = [self._shared]
            pool = ProcessPoolExecutor(
                self.size, multiprocessing.get_context("fork"), _settle_in, (os.getpid(),)
            )
            with warnings.catch_warnings():
                warnings.filterwarnings("ignore", "This process .* is multi-threaded")
                list(pool.map(abs, range(self.size)))
            _SHARED.clear()
            self._pool = pool
        return self._pool


def _settle_in(parent: int) -> None:
    """Leave the keyboard to the parent, and end when it has ended."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)

    def watch() -> None:
        while os.getppid() == parent:
            time.sleep(_WATCH)
        os._exit(1)

    threading.Thread(target=watch, daemon=True).start()


def _answer(work: Work, job: Any) -> Any:
    return work(_SHARED[0], job)
