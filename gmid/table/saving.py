"""Adding sweeps to a table: checked first, then written whole or not at all."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from pathlib import Path

from gmid.condition import Condition
from gmid.errors import DataFault, FileTrouble
from gmid.files import locked, writing
from gmid.sweep.model import Sweep
from gmid.table.store import IndexEntry
from gmid.table.table import Table, open_grid_data
from gmid.table.writer import rewrite_table

LOCK_WAIT = 600.0
"""How long an import waits for another one into the same table [s]."""


def check_additions(table: Table | None, sweeps: Sequence[Sweep], *, replace: bool) -> None:
    """Check that new sweeps fit a table, before anything is written.

    Parameters
    ----------
    table : Table or None
        What is there.
    sweeps : sequence of Sweep
        What is to be added.
    replace : bool
        Whether a device and condition already there may be replaced.

    Raises
    ------
    DataFault
        If a sweep is there already, or its unit transistor differs from the device's.

    Examples
    --------
    >>> check_additions(None, [], replace=False)
    """
    if table is None:
        return
    held = {(entry.device, entry.condition) for entry in table.entries}
    again = [sweep.label for sweep in sweeps if (sweep.device, sweep.condition) in held]
    if again and not replace:
        raise DataFault(
            f"already holds {', '.join(again)}.",
            where=str(table.path),
            hint="Give --force to replace them, or write another table.",
        )
    staying = _staying(table, sweeps)
    for sweep in sweeps:
        others = [entry for entry in staying if entry.device == sweep.device]
        if not others:
            continue
        unit = table.sweep(sweep.device, others[0].condition).unit
        if unit != sweep.unit:
            raise DataFault(
                f"{sweep.label} was simulated with another unit transistor than "
                f"{sweep.device} {others[0].condition} of this table: {sweep.unit} against {unit}.",
                where=str(table.path),
                hint="One device has one width, finger count, polarity and netlist line.",
            )


def check_nominal(entries: Iterable[tuple[str, Condition, bool]], where: str) -> None:
    """Check that no device has two conditions marked nominal.

    Parameters
    ----------
    entries : iterable of (str, Condition, bool)
        Device, condition and mark.
    where : str
        The table, for the message.

    Raises
    ------
    DataFault
        If a device has two.

    Examples
    --------
    >>> check_nominal([("nmos", Condition("tt", 27.0), True)], "t.h5")
    """
    marked: dict[str, Condition] = {}
    for device, condition, nominal in entries:
        if nominal and marked.setdefault(device, condition) != condition:
            raise DataFault(
                f"{device} would have two nominal conditions, {marked[device]} and {condition}.",
                where=where,
                hint="Mark one only: nominal = true.",
            )


def _staying(table: Table, sweeps: Sequence[Sweep]) -> list[IndexEntry]:
    leaving = {(sweep.device, sweep.condition) for sweep in sweeps}
    return [entry for entry in table.entries if (entry.device, entry.condition) not in leaving]


def save_sweeps(
    path: str | Path,
    sweeps: Sequence[Sweep],
    *,
    process: str,
    replace: bool = False,
    compact: bool = False,
    waiting: Callable[[str], None] | None = None,
) -> Table:
    """Store sweeps in a table file, new or there already, whole or not at all.

    Parameters
    ----------
    path : str or Path
        The table; what it holds already stays.
    sweeps : sequence of Sweep
        Checked grid data.
    process : str
        Name of the process; must be that of an existing table.
    replace : bool
        Replace a device and condition that is there already.
    compact : bool
        Store 32-bit compressed numbers.
    waiting : callable, optional
        Told once when another import holds the table.

    Returns
    -------
    Table
        The table as it is now.

    Raises
    ------
    DataFault
        If the sweeps do not fit the table; it is then as it was.
    FileTrouble
        If the file cannot be written; it is then as it was.

    Examples
    --------
    >>> import tempfile
    >>> from gmid.table.writer import smallest_sweep
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     save_sweeps(Path(folder) / "t.h5", [smallest_sweep()], process="larch180").devices
    ['nmos']
    """
    path = Path(path)
    if not path.parent.is_dir():
        raise FileTrouble(
            f"there is no directory {path.parent}.", where=str(path), hint="Create it first."
        )
    with locked(path, wait=LOCK_WAIT, on_wait=waiting):
        table = open_grid_data(path) if path.exists() else None
        if table is not None and table.process != process:
            raise DataFault(
                f"is a table of process {table.process!r}, the recipe's is {process!r}.",
                where=str(path),
                hint="Write another table.",
            )
        check_additions(table, sweeps, replace=replace)
        staying = _staying(table, sweeps) if table is not None else []
        check_nominal(
            [
                *((e.device, e.condition, e.nominal) for e in staying),
                *((s.device, s.condition, s.nominal) for s in sweeps),
            ],
            str(path),
        )
        with writing(path, force=True) as temporary:
            rewrite_table(temporary, table, staying, sweeps, process=process, compact=compact)
        return open_grid_data(path)
