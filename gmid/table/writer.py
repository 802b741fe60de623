"""Writing a table file: what stays of the old one, then what is new."""

from __future__ import annotations

import hashlib
import json
import shutil
import zlib
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from gmid.condition import Condition
from gmid.errors import DataFault
from gmid.nomenclature import AXES, SWEEP_QUANTITIES, find_quantity
from gmid.sweep.model import Sweep, UnitTransistor
from gmid.table.store import FORMAT, IndexEntry, get_text, group_name, put_text
from gmid.table.table import Table


def rewrite_table(
    target: Path,
    table: Table | None,
    staying: Sequence[IndexEntry],
    sweeps: Sequence[Sweep],
    *,
    process: str,
    compact: bool,
) -> None:
    """Write a whole table to a fresh file.

    Where nothing of the old table goes, its bytes are copied and the new sweeps appended;
    otherwise the staying sweeps are written anew, so that no dead space is left behind.

    Parameters
    ----------
    target : Path
        File to write; not the table itself.
    table : Table or None
        The old table.
    staying : sequence of IndexEntry
        Its sweeps that stay.
    sweeps : sequence of Sweep
        New sweeps.
    process : str
        Name of the process.
    compact : bool
        Store the new sweeps as 32-bit compressed numbers.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     rewrite_table(Path(folder) / "t.h5", None, [], [], process="p", compact=False)
    """
    entries: list[IndexEntry] = []
    whole = table is not None and len(staying) == len(table.entries)
    if table is not None and whole:
        shutil.copyfile(table.path, target)
        entries += staying
    mode = "r+" if whole else "w"
    with h5py.File(target, mode, libver="latest", **_IN_MEMORY) as root:
        if table is not None and not whole:
            for entry in staying:
                kept = table.sweep(entry.device, entry.condition)
                entries.append(write_sweep(root, kept, compact=_is_compact(table, entry)))
        for sweep in sweeps:
            entries.append(write_sweep(root, sweep, compact=compact))
        write_index(root, process, _in_order(entries, table))
        root.flush()
        image = root.id.get_file_image()
    target.write_bytes(image)


_IN_MEMORY: dict[str, Any] = {"driver": "core", "backing_store": False, "block_size": 1 << 22}
"""The HDF5 library cannot stop in the middle: on a full disk it would bring the process down.
So the file is made in memory, and written where an error is one like any other."""


def _in_order(entries: Sequence[IndexEntry], table: Table | None) -> list[IndexEntry]:
    """Give a replaced sweep the place of the old one; what is new comes last."""
    old = [] if table is None else [(entry.device, entry.condition) for entry in table.entries]
    return sorted(
        entries,
        key=lambda e: old.index(key) if (key := (e.device, e.condition)) in old else len(old),
    )


def _is_compact(table: Table, entry: IndexEntry) -> bool:
    with h5py.File(table.path, "r") as root:
        stored = root[group_name(entry.device, entry.condition)]["id"]
        return bool(stored.dtype.itemsize == 4)


def write_sweep(root: h5py.File, sweep: Sweep, *, compact: bool) -> IndexEntry:
    """Store one sweep as a group of an open table file.

    Parameters
    ----------
    root : h5py.File
        Open for writing.
    sweep : Sweep
        Its group must not exist yet.
    compact : bool
        Store 32-bit floats, shuffled and compressed (relative rounding 6e-8) instead of
        plain 64-bit arrays.

    Returns
    -------
    IndexEntry
        For `write_index`.

    Examples
    --------
    >>> with h5py.File("x.h5", "w", driver="core", backing_store=False) as root:
    ...     entry = write_sweep(root, smallest_sweep(), compact=False)
    ...     print(get_text(root["nmos/tt/27/id"], "units"))
    A
    """
    group = root.create_group(group_name(sweep.device, sweep.condition))
    for name, axis in sweep.axes.items():
        data = group.create_dataset(name, data=np.asarray(axis, dtype=np.float64))
        data.make_scale(name)
        _describe(data, name, axis)
    for name, values in sweep.values.items():
        array = np.asarray(values, dtype=np.float32 if compact else np.float64)
        if not np.all(np.isfinite(array)):
            raise DataFault(
                f"{name} of {sweep.label} does not fit 32-bit floats.",
                hint="Import it without --compact.",
            )
        options: dict[str, Any] = {}
        if compact:
            options = {
                "compression": "gzip",
                "compression_opts": 9,
                "shuffle": True,
                "chunks": array.shape,
            }
        data = group.create_dataset(name, data=array, **options)
        for position, axis_name in enumerate(AXES):
            data.dims[position].attach_scale(group[axis_name])
        _describe(data, name, array)
    attributes: dict[str, Any] = {
        "device": sweep.device,
        "corner": sweep.condition.corner,
        "temperature": float(sweep.condition.temperature),
        "polarity": sweep.unit.polarity,
        "width": float(sweep.unit.width),
        "fingers": int(sweep.unit.fingers),
        "netlist": sweep.unit.netlist or "",
        "nominal": int(sweep.nominal),
        "derived": json.dumps(dict(sweep.derived)),
        "provenance": json.dumps(dict(sweep.provenance)),
    }
    for name, value in attributes.items():
        if isinstance(value, str):
            put_text(group, name, value)
        else:
            group.attrs[name] = value
    digest = _digest(group)
    put_text(group, "digest", digest)
    return IndexEntry(sweep.device, sweep.condition, sweep.nominal, digest)


def write_index(root: h5py.File, process: str, entries: Sequence[IndexEntry]) -> None:
    """Store the list of sweeps and the table's own attributes; the last step of a writer.

    Parameters
    ----------
    root : h5py.File
        Open for writing.
    process : str
        Name of the process.
    entries : sequence of IndexEntry
        In the order in which they came.

    Examples
    --------
    >>> with h5py.File("x.h5", "w", driver="core", backing_store=False) as root:
    ...     write_index(root, "larch180", [])
    ...     print(get_text(root, "process"))
    larch180
    """
    from importlib.metadata import version

    root.attrs["format"] = FORMAT
    put_text(root, "process", process)
    put_text(root, "written_by", f"gmid {version('gmid')}")
    listed = [
        [
            entry.device,
            entry.condition.corner,
            entry.condition.temperature,
            int(entry.nominal),
            entry.digest,
        ]
        for entry in entries
    ]
    put_text(root, "index", json.dumps(listed))


def smallest_sweep() -> Sweep:
    """Make the smallest sweep that can be stored, for examples.

    Returns
    -------
    Sweep
        One point of a device ``nmos``.

    Examples
    --------
    >>> smallest_sweep().shape
    (1, 1, 1, 1)
    """
    one = np.ones(1)
    return Sweep(
        "nmos",
        Condition("tt", 27.0),
        UnitTransistor("n", 2e-6),
        one * 1e-6,
        one * 0,
        one,
        one,
        {"id": np.ones((1, 1, 1, 1))},
    )


def _describe(data: h5py.Dataset, name: str, values: NDArray[Any]) -> None:
    quantity = find_quantity(name)
    put_text(data, "units", quantity.unit or "1")
    put_text(data, "long_name", quantity.meaning)
    data.attrs["checksum"] = int(zlib.crc32(np.ascontiguousarray(values).tobytes()))


def _digest(group: h5py.Group) -> str:
    """Hash of a sweep's numbers and of what gives them their meaning."""
    quantities = [name for name in group if name not in AXES]
    ordered = sorted(quantities, key=SWEEP_QUANTITIES.index)
    put_text(group, "quantities", json.dumps(ordered))
    kept: dict[str, Any] = {
        name: get_text(group, name)
        for name in ("device", "corner", "polarity", "netlist", "derived")
    }
    numbers = ("temperature", "width", "fingers", "nominal")
    kept["numbers"] = [float(group.attrs[name]) for name in numbers]
    kept["data"] = {name: int(group[name].attrs["checksum"]) for name in (*AXES, *ordered)}
    text = json.dumps(kept, sort_keys=True, default=str)
    return hashlib.sha256(text.encode()).hexdigest()
