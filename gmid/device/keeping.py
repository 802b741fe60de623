"""Spline coefficients kept for later queries, within one bound for all devices together.

What was used last stays longest.  What a caller still holds is never made twice, even when the
bound has pushed it out.
"""

from __future__ import annotations

import itertools
import math
from collections import OrderedDict
from collections.abc import Hashable
from threading import RLock, local
from typing import Any, TypeVar
from weakref import WeakValueDictionary, finalize

import numpy as np

from gmid.device.spline import Array

Kept = TypeVar("Kept")

LIMIT = 512 * 1024 * 1024
"""Coefficients kept for all devices together [byte]."""

_NUMBERS = itertools.count()


class Keeper:
    """A store of costly objects, the least recently used going first.

    Parameters
    ----------
    limit : int
        Sum of the sizes kept [byte]; one larger than this is handed out but not kept.

    Examples
    --------
    >>> class Block:
    ...     pass
    >>> keeper = Keeper(100)
    >>> for name in ("a", "b", "c"):
    ...     _ = keeper.keep(0, name, Block(), 40)
    >>> keeper.find(0, "a") is None, keeper.size
    (True, 80)
    """

    def __init__(self, limit: int) -> None:
        self.limit = limit
        self.size = 0
        self._held: OrderedDict[tuple[int, Hashable], tuple[Any, int]] = OrderedDict()
        self._live: WeakValueDictionary[tuple[int, Hashable], Any] = WeakValueDictionary()
        self._lock = RLock()

    def find(self, owner: int, key: Hashable) -> Any:
        """Look for an object.

        Parameters
        ----------
        owner : int
            Number of its owner, as `own` gives it.
        key : hashable
            Its name there.

        Returns
        -------
        object
            None where it is neither kept nor held by anyone.

        Examples
        --------
        >>> Keeper(100).find(0, "a") is None
        True
        """
        place = (owner, key)
        with self._lock:
            held = self._held.get(place)
            if held is not None:
                self._held.move_to_end(place)
                return held[0]
            return self._live.get(place)

    def keep(self, owner: int, key: Hashable, made: Kept, size: int) -> Kept:
        """Keep an object, and let go of those used longest ago if there are too many.

        Parameters
        ----------
        owner : int
            Number of its owner.
        key : hashable
            Its name there.
        made : object
            What to keep; it must allow weak references.
        size : int
            Its size [byte].

        Returns
        -------
        object
            The same.

        Examples
        --------
        >>> class Block:
        ...     pass
        >>> keeper, block = Keeper(100), Block()
        >>> keeper.keep(0, "a", block, 60) is keeper.find(0, "a")
        True
        """
        place = (owner, key)
        with self._lock:
            self._live[place] = made
            self._let_go(place)
            if size <= self.limit:
                self._held[place] = (made, size)
                self.size += size
            while self.size > self.limit:
                self._let_go(next(iter(self._held)))
        return made

    def _let_go(self, place: tuple[int, Hashable]) -> None:
        held = self._held.pop(place, None)
        if held is not None:
            self.size -= held[1]

    def own(self, owner: object) -> int:
        """Give an owner its number; its objects are let go when it is gone.

        Parameters
        ----------
        owner : object
            Whoever keeps things here.

        Returns
        -------
        int
            Its number.

        Examples
        --------
        >>> class Block:
        ...     pass
        >>> keeper, owner = Keeper(100), Block()
        >>> number = keeper.own(owner)
        >>> _ = keeper.keep(number, "a", Block(), 60)
        >>> del owner
        >>> keeper.size
        0
        """
        number = next(_NUMBERS)
        finalize(owner, self.drop, number).atexit = False
        return number

    def drop(self, owner: int) -> None:
        """Let go of all that belongs to an owner.

        Parameters
        ----------
        owner : int
            Its number.

        Examples
        --------
        >>> Keeper(100).drop(0)
        """
        with self._lock:
            for place in [place for place in self._held if place[0] == owner]:
                self._let_go(place)


KEEPER = Keeper(LIMIT)
"""What all interpolants keep."""

_SCRATCH = local()
_LARGEST_SCRATCH = 1 << 21
"""Numbers up to which a thread's working memory is kept."""


def borrow(shape: tuple[int, ...]) -> Array:
    """Give working memory, the same at each call: fresh memory costs more than many a sum.

    Parameters
    ----------
    shape : tuple of int
        Its shape.

    Returns
    -------
    ndarray
        Numbers of no meaning, to be used up before anything else of the thread borrows.

    Examples
    --------
    >>> borrow((2, 3)).shape
    (2, 3)
    """
    size = math.prod(shape)
    held: Array | None = getattr(_SCRATCH, "numbers", None)
    if held is None or held.size < size:
        held = np.empty(size)
        if size <= _LARGEST_SCRATCH:
            _SCRATCH.numbers = held
    return held[:size].reshape(shape)
