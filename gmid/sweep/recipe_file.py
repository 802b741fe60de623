"""The recipe as a TOML file: read, checked key by key, turned into a `Recipe`."""

from __future__ import annotations

import re
from functools import partial
from pathlib import Path
from typing import Annotated, Any, Literal

from gmid.documents import (
    Count,
    Document,
    Flag,
    Frequency,
    Length,
    Model,
    Parsed,
    Text,
    read_document,
)
from gmid.errors import DataFault, GmidError, UnknownName, advise, raise_faults
from gmid.nomenclature import AXES, QUANTITIES, SWEEP_QUANTITIES
from gmid.sweep.model import UnitTransistor
from gmid.sweep.readers import LAYOUTS
from gmid.sweep.recipe import Recipe, SweepRecipe, ValueSource
from gmid.sweep.recipe_sources import read_source, read_temperature, read_word

_PLACEHOLDERS = ("name", "d", "g", "s", "b", "width", "length", "count")
_REQUIRED = ("name", "d", "g", "s", "b", "length", "count")


def _source_model(name: str, names: tuple[str, ...], *, outer: bool) -> type[Model]:
    """Build a model with one optional source for each name."""
    annotations: dict[str, Any] = {}
    defaults: dict[str, Any] = {}
    for entry in names:
        read = partial(read_source, unit=QUANTITIES[entry].unit, outer=outer)
        annotations[entry] = Annotated[ValueSource | None, Parsed(read)]
        defaults[entry] = None
    return type(
        name, (Model,), {"__annotations__": annotations, "__module__": __name__, **defaults}
    )


_Axes = _source_model("_Axes", AXES, outer=True)
_Quantities = _source_model("_Quantities", SWEEP_QUANTITIES, outer=False)


def _read_netlist(raw: object) -> str:
    if not isinstance(raw, str):
        raise DataFault("expected a SPICE device line in quotes.")
    found = re.findall(r"\{([^{}]*)\}", raw)
    for name in found:
        if name not in _PLACEHOLDERS:
            raise UnknownName(f"{{{name}}} is not known.", hint=advise(name, _PLACEHOLDERS))
    missing = [name for name in _REQUIRED if name not in found]
    if missing:
        raise DataFault(f"the line lacks {', '.join('{' + name + '}' for name in missing)}.")
    return raw


def _read_pattern(raw: object) -> str:
    if not isinstance(raw, str):
        raise DataFault("expected a regular expression in quotes.")
    try:
        re.compile(raw)
    except re.error as trouble:
        raise DataFault(f"the pattern {raw!r} is not valid: {trouble}.") from None
    return raw


class _Sweep(Model):
    files: Text | tuple[Text, ...]
    device: Text
    polarity: Literal["n", "p"]
    width: Length
    fingers: Count = 1
    corner: Annotated[ValueSource, Parsed(read_word)] = ValueSource(value="tt")
    temperature: Annotated[ValueSource, Parsed(read_temperature)] = ValueSource(value=27.0)
    nominal: Flag = False
    netlist: Annotated[str | None, Parsed(_read_netlist)] = None
    layout: Text = "auto"
    columns: tuple[Text, ...] = ()
    suffixes: Literal["spice", "si"] | None = None
    record: Annotated[str | None, Parsed(_read_pattern)] = None
    plots: Annotated[str | None, Parsed(_read_pattern)] = None
    frequency: Frequency | None = None
    rows: dict[str, str] = {}  # noqa: RUF012 - the model library copies it
    axes: _Axes = _Axes()  # type: ignore[valid-type]
    quantities: _Quantities = _Quantities()  # type: ignore[valid-type]


class _TableKeys(Model):
    process: Text


class _RecipeFile(Model):
    format: Literal[1]
    table: _TableKeys
    sweep: tuple[_Sweep, ...]


def read_recipe(path: str | Path) -> Recipe:
    """Read a recipe file.

    Parameters
    ----------
    path : str or Path
        The file; the sweeps' files are found relative to it.

    Returns
    -------
    Recipe
        Ready to be imported.

    Raises
    ------
    GmidError
        Every fault of the file, each with line and key.

    Examples
    --------
    >>> read_recipe("missing.toml")
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.toml: there is no such file.
    """
    path = Path(path)
    document = read_document(path, _RecipeFile)
    sweeps: list[SweepRecipe] = []
    faults: list[GmidError] = []
    if not document.model.sweep:
        faults.append(DataFault("has no [[sweep]].", where=document.where("sweep")))
    for index, entry in enumerate(document.model.sweep):
        try:
            sweeps.append(_sweep_recipe(document, index, entry, path.parent))
        except GmidError as fault:
            faults.append(fault)
    raise_faults(faults)
    text = path.read_text(encoding="utf-8")
    return Recipe(document.model.table.process, tuple(sweeps), text, path.name)


def _sweep_recipe(
    document: Document[_RecipeFile], index: int, entry: _Sweep, folder: Path
) -> SweepRecipe:
    place = partial(document.where, "sweep", index)
    if entry.layout != "auto" and entry.layout not in LAYOUTS:
        raise UnknownName(
            f"layout {entry.layout!r} is not known.",
            where=place("layout"),
            hint=advise(entry.layout, ["auto", *LAYOUTS]),
        )
    unit = UnitTransistor(entry.polarity, entry.width, entry.fingers, entry.netlist)
    return SweepRecipe(
        device=check_name(entry.device, place("device")),
        unit=unit,
        files=_find_files(entry.files, folder, place("files")),
        axes=_sources(entry.axes, AXES, partial(place, "axes")),
        quantities=_sources(entry.quantities, SWEEP_QUANTITIES, partial(place, "quantities")),
        corner=_placed(entry.corner, place("corner")),
        temperature=_placed(entry.temperature, place("temperature")),
        nominal=entry.nominal,
        layout=entry.layout,
        columns=entry.columns,
        suffixes=entry.suffixes,
        rows=entry.rows,
        record=entry.record,
        plots=entry.plots,
        frequency=entry.frequency,
        where=place(),
    )


def check_name(name: str, where: str | None = None) -> str:
    """Check that a device's name can stand in files and plans.

    Parameters
    ----------
    name : str
        Device name.
    where : str, optional
        Place for the message.

    Returns
    -------
    str
        The name.

    Raises
    ------
    DataFault
        If it cannot.

    Examples
    --------
    >>> check_name("nmos_low")
    'nmos_low'
    """
    if re.fullmatch(r"[A-Za-z][A-Za-z0-9_]*", name) is None:
        raise DataFault(
            f"{name!r} cannot name a device.",
            where=where,
            hint="Use letters, digits and _, starting with a letter.",
        )
    return name


def _sources(model: Any, names: tuple[str, ...], place: Any) -> dict[str, ValueSource]:
    found = {name: getattr(model, name) for name in names}
    return {
        name: _placed(source, place(name)) for name, source in found.items() if source is not None
    }


def _placed(source: ValueSource, where: str) -> ValueSource:
    from dataclasses import replace

    return replace(source, where=where)


def _find_files(patterns: str | tuple[str, ...], folder: Path, where: str) -> tuple[Path, ...]:
    """Resolve file names and globs, sorted within each pattern."""
    found: dict[Path, None] = {}
    for pattern in (patterns,) if isinstance(patterns, str) else patterns:
        direct = folder / pattern
        if direct.is_file():
            found[direct] = None
            continue
        base, tail = (
            (Path(Path(pattern).anchor), str(Path(pattern).relative_to(Path(pattern).anchor)))
            if Path(pattern).is_absolute()
            else (folder, pattern)
        )
        matches = sorted(path for path in base.glob(tail) if path.is_file())
        if not matches:
            raise DataFault(
                f"no file matches {pattern!r}.",
                where=where,
                hint=f"Names are relative to {folder or '.'}.",
            )
        found.update(dict.fromkeys(matches))
    return tuple(found)
