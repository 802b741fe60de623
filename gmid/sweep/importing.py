"""From a recipe to checked sweeps: read, map, turn signs, grid, derive, judge.

Everything is checked before anything is returned, so that a faulty text never touches a
table.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from gmid.errors import DataFault, GmidError, UnknownName, raise_faults
from gmid.sweep.checks import check_sweep
from gmid.sweep.coverage import Trail
from gmid.sweep.derive import derive_missing
from gmid.sweep.gridding import build_sweep
from gmid.sweep.mapping import map_tables
from gmid.sweep.merging import merge_rows
from gmid.sweep.model import Sweep
from gmid.sweep.parts import list_columns
from gmid.sweep.readers import read_text
from gmid.sweep.recipe import Recipe, SweepRecipe
from gmid.sweep.rows import Note, Rows
from gmid.sweep.signs import normalise_signs
from gmid.sweep.source import open_source
from gmid.sweep.texttable import TextTable

_MOST_NOTES = 3

Progress = Callable[[str, int, int], None]
"""Called with what is being done, how many steps are done and how many there are."""


@dataclass(frozen=True)
class SourceFile:
    """One text file that went into a sweep.

    Parameters
    ----------
    name : str
        File name without folders.
    sha256 : str
        Hash of its bytes as stored.
    layout : str
        Layout it was read as.
    rows : int
        Rows read from it.

    Examples
    --------
    >>> SourceFile("a.csv", "00", "csv", 10).rows
    10
    """

    name: str
    sha256: str
    layout: str
    rows: int


def import_recipe(
    recipe: Recipe, *, progress: Progress | None = None, trail: Trail | None = None
) -> list[Sweep]:
    """Read and check every sweep of a recipe.

    Parameters
    ----------
    recipe : Recipe
        What to read and how.
    progress : callable, optional
        Told of each file.
    trail : Trail, optional
        Told of the grids and sweeps found, also where the import then fails.

    Returns
    -------
    list of Sweep
        With audit and sources in `Sweep.provenance`.

    Raises
    ------
    GmidError
        Every fault of every sweep, told at once.

    Examples
    --------
    >>> import_recipe(Recipe("p", (), "", "r.toml"))
    []
    """
    total = sum(len(entry.files) for entry in recipe.sweeps)
    done = 0
    sweeps: list[Sweep] = []
    faults: list[GmidError] = []
    sources: dict[str, SourceFile] = {}
    mapped: dict[tuple[str, str], list[tuple[Rows, SweepRecipe]]] = {}
    devices = Counter(entry.device for entry in recipe.sweeps)
    for entry in recipe.sweeps:
        try:
            tables: list[TextTable] = []
            for path in entry.files:
                if progress is not None:
                    progress(f"{entry.device}: {path.name}", done, total)
                found, source = _read(path, entry)
                tables += found
                sources[found[0].source] = source
                done += 1
            for rows in map_tables(entry, tables, partial=devices[entry.device] > 1):
                key = entry.device, str(rows.condition)
                mapped.setdefault(key, []).append((rows, entry))
        except GmidError as fault:
            faults.append(fault)
    for group in mapped.values() if not faults else ():
        try:
            sweeps.append(_finish(_merged(group), group[0][1], recipe, sources, trail))
        except GmidError as fault:
            faults.append(fault)
    faults += _repeated(sweeps)
    raise_faults({str(fault): fault for fault in faults}.values())
    if progress is not None and total:
        progress("read", total, total)
    return sweeps


def _merged(group: Sequence[tuple[Rows, SweepRecipe]]) -> Rows:
    """Join what several sweeps of a recipe tell of one device and condition."""
    first, entry = group[0]
    names = Counter(name for rows, _ in group for name in rows.values)
    twice = [name for name, count in names.items() if count > 1]
    if twice:
        raise DataFault(
            f"{first.label} is imported twice by one recipe: {', '.join(twice)}.",
            where=group[1][1].where,
            hint="Give the sweeps different conditions, or different quantities to be joined.",
        )
    if "id" not in names:
        tables = [table for rows, _ in group for _, table, _ in rows.pieces]
        raise UnknownName(
            f"no column of {tables[0].source} gives id, the drain current.",
            where=entry.where,
            hint=f"Name it in the recipe: [sweep.quantities] id = ... {list_columns(tables[0])}",
        )
    for rows, other in group[1:]:
        if other.unit != entry.unit:
            raise DataFault(
                f"{rows.label} has another unit transistor in two sweeps that are to be joined: "
                f"{other.unit} against {entry.unit}.",
                where=other.where,
                hint="One device has one width, finger count, polarity and netlist line.",
            )
    files = tuple(dict.fromkeys(table.source for rows, _ in group for _, table, _ in rows.pieces))
    merged = merge_rows([rows for rows, _ in group])
    merged.files = files
    return merged


def _read(path: Any, entry: SweepRecipe) -> tuple[list[TextTable], SourceFile]:
    source = open_source(path)
    options: dict[str, Any] = {}
    if entry.columns:
        options["columns"] = entry.columns
    if entry.suffixes is not None:
        options["suffixes"] = entry.suffixes
    if entry.record is not None:
        options["record"] = entry.record
    tables = read_text(source, layout=entry.layout, **options)
    rows = sum(table.rows for table in tables)
    return tables, SourceFile(path.name, source.sha256, tables[0].layout, rows)


def _finish(
    rows: Rows,
    entry: SweepRecipe,
    recipe: Recipe,
    sources: Mapping[str, SourceFile],
    trail: Trail | None,
) -> Sweep:
    normalise_signs(rows, entry.unit.polarity)
    sweep = build_sweep(rows, entry, trail=trail)
    unwanted = frozenset(name for name, source in entry.quantities.items() if source.derived)
    sweep, derived = derive_missing(sweep, unwanted)
    if trail is not None:
        trail.sweeps.append(sweep)
    faults, doubts = check_sweep(sweep)
    raise_faults([_placed(fault, rows) for fault in faults])
    names = rows.files or tuple(dict.fromkeys(table.source for _, table, _ in rows.pieces))
    read = [sources[name] for name in names]
    first = Note(
        "read",
        f"{rows.size} rows from {len(read)} file(s), "
        f"{', '.join(sorted({source.layout for source in read}))}.",
    )
    notes = [first, *_reader_notes(rows), *rows.notes, *derived, *doubts]
    return replace(
        sweep,
        provenance={
            "sources": [vars(source) for source in read],
            "recipe": recipe.text,
            "recipe_name": recipe.name,
            "audit": [[note.level, note.text] for note in notes],
        },
    )


def _reader_notes(rows: Rows) -> list[Note]:
    """Tell what the readers left out or read in one of two ways; of many files, the first few."""
    metas = [table.meta for _, table, _ in rows.pieces]
    left = dict.fromkeys(meta["dropped"] for meta in metas if "dropped" in meta)
    doubts = dict.fromkeys(
        line for meta in metas for line in meta.get("note", "").splitlines() if line
    )
    return [Note("read", f"left out: {names}.") for names in list(left)[:_MOST_NOTES]] + [
        Note("doubtful", text) for text in list(doubts)[:_MOST_NOTES]
    ]


def _placed(fault: GmidError, rows: Rows) -> GmidError:
    """Give a fault of the whole sweep the file it came from."""
    if fault.where is None:
        fault.where = rows.pieces[0][1].source
    return fault


def _repeated(sweeps: Sequence[Sweep]) -> list[GmidError]:
    """Check that sweeps of one recipe agree on units and do not repeat a condition."""
    faults: list[GmidError] = []
    seen: dict[tuple[str, str], Sweep] = {}
    units: dict[str, Sweep] = {}
    for sweep in sweeps:
        key = (sweep.device, str(sweep.condition))
        if key in seen:
            faults.append(
                DataFault(
                    f"{sweep.label} is imported twice by one recipe.",
                    hint="Give the sweeps different conditions.",
                )
            )
        seen[key] = sweep
        first = units.setdefault(sweep.device, sweep)
        if first.unit != sweep.unit:
            faults.append(
                DataFault(
                    f"{sweep.label} has another unit transistor than {first.label}: "
                    f"{sweep.unit} against {first.unit}.",
                    hint="One device has one width, finger count, polarity and netlist line.",
                )
            )
    return faults
