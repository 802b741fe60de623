"""The layout of the table file: groups, index, format number, and opening it.

One group ``/DEVICE/CORNER/TEMPERATURE`` for each sweep, holding the four axes as dimension
scales and each quantity as a dataset over them, with unit, long name and a checksum.  The
file holds grid data alone; interpolation is built on opening.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from gmid.condition import Condition
from gmid.errors import DataFault, FileTrouble, GmidError

FORMAT = 1
"""Number of the file layout; another number is refused."""


@dataclass(frozen=True)
class IndexEntry:
    """One line of a table's index.

    Parameters
    ----------
    device : str
        Device name.
    condition : Condition
        Corner and temperature.
    nominal : bool
        Whether it was marked as the device's nominal condition.
    digest : str
        Hash of the sweep's numbers and of what gives them their meaning.

    Examples
    --------
    >>> IndexEntry("nmos", Condition("tt", 27.0), True, "00").condition
    Condition('tt/27')
    """

    device: str
    condition: Condition
    nominal: bool
    digest: str


def group_name(device: str, condition: Condition) -> str:
    """Name the group of a device in a condition.

    Parameters
    ----------
    device : str
        Device name.
    condition : Condition
        Corner and temperature.

    Returns
    -------
    str
        ``DEVICE/CORNER/TEMPERATURE``.

    Examples
    --------
    >>> group_name("nmos", Condition("ss", -40.0))
    'nmos/ss/-40'
    """
    return f"{device}/{condition.corner}/{condition.temperature:.10g}"


def put_text(group: h5py.Group, name: str, text: str) -> None:
    """Store a text as an attribute of fixed length, which the file's own checksums cover.

    Parameters
    ----------
    group : h5py.Group
        The group it belongs to.
    name : str
        Attribute name.
    text : str
        Any text.

    Examples
    --------
    >>> with h5py.File("x.h5", "w", driver="core", backing_store=False) as root:
    ...     put_text(root, "process", "larch180")
    ...     print(get_text(root, "process"))
    larch180
    """
    data = text.encode()
    group.attrs.create(name, data, dtype=h5py.string_dtype("utf-8", max(1, len(data))))


def get_text(group: h5py.Group, name: str) -> str:
    """Read a text attribute.

    Parameters
    ----------
    group : h5py.Group
        The group it belongs to.
    name : str
        Attribute name.

    Returns
    -------
    str
        The text.

    Examples
    --------
    >>> with h5py.File("x.h5", "w", driver="core", backing_store=False) as root:
    ...     put_text(root, "netlist", "")
    ...     print(repr(get_text(root, "netlist")))
    ''
    """
    attribute = h5py.h5a.open(group.id, name.encode())
    if attribute.dtype.kind == "S" and attribute.shape == ():
        value = np.empty((), dtype=attribute.dtype)
        attribute.read(value)
        return bytes(value[()]).decode()
    held = group.attrs[name]
    return held.decode() if isinstance(held, bytes) else str(held)


class OpenedTable:
    """Open a table file for reading, turning every way it may fail into words.

    Parameters
    ----------
    path : Path
        The table file.

    Examples
    --------
    >>> with OpenedTable(Path("missing.h5")) as root:
    ...     pass
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.h5: there is no such file.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self._file: h5py.File | None = None

    def __enter__(self) -> h5py.File:
        if not self.path.exists():
            raise FileTrouble("there is no such file.", where=str(self.path))
        try:
            self._file = h5py.File(self.path, "r")
            found = int(self._file.attrs.get("format", -1))
        except (OSError, RuntimeError, KeyError, ValueError, TypeError) as trouble:
            self.__exit__(None, None, None)
            raise _damaged(self.path, trouble) from trouble
        if found != FORMAT:
            self.__exit__(None, None, None)
            raise DataFault(
                "is an HDF5 file but not a device table."
                if found < 0
                else f"is a table of format {found}; this version reads format {FORMAT}.",
                where=str(self.path),
                hint="Make it anew with gmid import.",
            )
        return self._file

    def __exit__(self, kind: Any, trouble: Any, trace: Any) -> None:
        if self._file is not None:
            self._file.close()
            self._file = None
        if isinstance(trouble, (OSError, RuntimeError, KeyError, ValueError, TypeError)) and not (
            isinstance(trouble, GmidError)
        ):
            raise _damaged(self.path, trouble) from trouble


def read_index(root: h5py.File) -> list[IndexEntry]:
    """Read which sweeps a table file holds, in the order in which they came.

    Parameters
    ----------
    root : h5py.File
        An open table file.

    Returns
    -------
    list of IndexEntry
        One for each sweep.

    Examples
    --------
    >>> with h5py.File("x.h5", "w", driver="core", backing_store=False) as root:
    ...     root.attrs["index"] = "[]"
    ...     print(read_index(root))
    []
    """
    return [
        IndexEntry(device, Condition(corner, temperature), bool(nominal), digest)
        for device, corner, temperature, nominal, digest in json.loads(get_text(root, "index"))
    ]


def combine_digests(entries: Sequence[IndexEntry]) -> str:
    """Hash what a table holds, whatever the order in which it came.

    Parameters
    ----------
    entries : sequence of IndexEntry
        The table's index.

    Returns
    -------
    str
        Hexadecimal SHA-256 over the digests of all sweeps.

    Examples
    --------
    >>> len(combine_digests([]))
    64
    """
    import hashlib

    lines = sorted(f"{group_name(e.device, e.condition)} {e.digest}" for e in entries)
    return hashlib.sha256("\n".join(lines).encode()).hexdigest()


def _damaged(path: Path, trouble: Exception) -> DataFault:
    return DataFault(
        f"is damaged or not an HDF5 file ({trouble}).".replace("\n", " "),
        where=str(path),
        hint="Take a whole copy of the table, or make it anew with gmid import.",
    )
