"""Where a byte stands in a block, and how often."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

_PIECE = 1 << 16
"""Bytes compared at once, so few that what comes of it needs no fresh memory."""


def count_bytes(block: bytes, wanted: int = 10) -> int:
    r"""Count a byte, several times faster than ``bytes.count`` where it is frequent.

    Parameters
    ----------
    block : bytes
        Any bytes.
    wanted : int
        The byte; the line feed by default.

    Returns
    -------
    int
        How often it occurs.

    Examples
    --------
    >>> count_bytes(b"a\nb\n")
    2
    """
    letters = np.frombuffer(block, dtype=np.uint8)
    pieces = range(0, letters.size, _PIECE)
    return sum(int(np.count_nonzero(letters[at : at + _PIECE] == wanted)) for at in pieces)


def find_bytes(block: bytes, wanted: int = 10) -> NDArray[np.int64]:
    r"""Find where a byte occurs.

    Parameters
    ----------
    block : bytes
        Any bytes.
    wanted : int
        The byte; the line feed by default.

    Returns
    -------
    ndarray of int, shape (n,)
        Places, rising.

    Examples
    --------
    >>> find_bytes(b"a\nb\n").tolist()
    [1, 3]
    """
    letters = np.frombuffer(block, dtype=np.uint8)
    pieces = range(0, letters.size, _PIECE)
    found = [np.flatnonzero(letters[at : at + _PIECE] == wanted) + at for at in pieces]
    return np.concatenate(found) if found else np.empty(0, dtype=np.int64)
