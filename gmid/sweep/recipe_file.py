"""The recipe as a TOML file: read, checked key by key, turned into a `Recipe`."""

from __future__ import annotations

import re
from collections.abc import Mapping
from functools import partial
from pathlib import Path
from typing import Annotated, Any, Literal

from gmid.documents import (
    Count,
    Document,
    Flag,
    Length,
    Model,
    Parsed,
    Text,
    read_document,
)
from gmid.errors import DataFault, GmidError, UnknownName, advise, raise_faults
from gmid.nomenclature import AXES, QUANTITIES, SWEEP_QUANTITIES
from gmid.quantity import parse_quantity
from gmid.sweep.model import UnitTransistor
from gmid.sweep.readers import LAYOUTS
from gmid.sweep.recipe import ORIGINS, Recipe, SweepRecipe, ValueSource

_KEYS = ("column", "unit", "value", "from", "pattern", "restart", "outside", "derived")
_PLACEHOLDERS = ("name", "d", "g", "s", "b", "width", "length", "count")
_REQUIRED = ("name", "d", "g", "s", "b", "length", "count")


def _read_source(raw: object, *, unit: str, outer: bool) -> ValueSource:
    """Read an axis or a quantity: an expression, a number, or an inline table."""
    if isinstance(raw, str):
        return ValueSource(expression=raw)
    if isinstance(raw, (int, float)) and not isinstance(raw, bool):
        return ValueSource(value=float(raw))
    if not isinstance(raw, Mapping):
        raise DataFault(
            "expected an expression, a number or a table.",
            hint='Such as "v(d)" or { value = "0.18 um" }.',
        )
    for key in raw:
        if key not in _KEYS:
            raise UnknownName(f"{key!r} is not a known key here.", hint=advise(str(key), _KEYS))
    kinds = [key for key in ("column", "value", "from", "restart", "derived") if key in raw]
    if len(kinds) != 1:
        raise DataFault(
            f"needs exactly one of column, value, from, restart{'' if outer else ', derived'}; "
            f"found {', '.join(kinds) or 'none of them'}."
        )
    spelled = raw.get("unit")
    if spelled is not None and not isinstance(spelled, str):
        raise DataFault("unit must be a text such as 'um'.")
    readers = {
        "column": _by_column,
        "value": _by_value,
        "from": _by_origin,
        "restart": _by_restart,
        "derived": _by_derivation,
    }
    return readers[kinds[0]](dict(raw), unit, spelled)


def _by_column(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    if not isinstance(raw["column"], str):
        raise DataFault("column must be a text.")
    return ValueSource(expression=raw["column"], unit=spelled)


def _by_value(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    text = f"{raw['value']} {spelled}" if spelled else raw["value"]
    return ValueSource(value=text if unit == "word" else parse_quantity(text, unit))


def _by_origin(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    origin, pattern = raw["from"], raw.get("pattern")
    if origin not in ORIGINS:
        raise UnknownName(f"from = {origin!r} is not a place.", hint=advise(str(origin), ORIGINS))
    if not isinstance(pattern, str):
        raise DataFault("needs a pattern, a regular expression whose first group is the value.")
    try:
        groups = re.compile(pattern).groups
    except re.error as trouble:
        raise DataFault(f"the pattern {pattern!r} is not valid: {trouble}.") from None
    if groups < 1:
        raise DataFault(
            f"the pattern {pattern!r} has no group.", hint="Put the value's part in parentheses."
        )
    return ValueSource(origin=str(origin), pattern=pattern, unit=spelled)


def _by_restart(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    values = expand_values(raw["restart"], unit, spelled)
    outside = raw.get("outside", "vgs")
    if outside not in AXES:
        raise UnknownName(f"outside = {outside!r} is not an axis.", hint=advise(str(outside), AXES))
    return ValueSource(restart=values, outside=str(outside))


def _by_derivation(raw: dict[str, Any], unit: str, spelled: str | None) -> ValueSource:
    if raw["derived"] is not True:
        raise DataFault("derived can only be true.")
    return ValueSource(derived=True)


def expand_values(raw: object, unit: str, spelled: str | None = None) -> tuple[float, ...]:
    """Expand ``start:stop:step`` (both ends in) or a list of values.

    Parameters
    ----------
    raw : object
        A text or a list.
    unit : str
        SI unit of the values.
    spelled : str, optional
        Unit in which bare numbers stand.

    Returns
    -------
    tuple of float
        In SI.

    Raises
    ------
    DataFault
        If the range is empty or its step does not fit.

    Examples
    --------
    >>> expand_values("0:0.3:0.1", "V")
    (0.0, 0.1, 0.2, 0.3)
    """

    def read(item: object) -> float:
        if spelled is None:
            return parse_quantity(item if isinstance(item, (int, float)) else str(item), unit)
        return parse_quantity(f"{item} {spelled}", unit)

    if isinstance(raw, (list, tuple)):
        if not raw:
            raise DataFault("the list of values is empty.")
        return tuple(read(item) for item in raw)
    parts = str(raw).split(":")
    if len(parts) != 3:
        raise DataFault(f"{raw!r} is not a range.", hint="Write start:stop:step, or a list.")
    start, stop, step = (read(part) for part in parts)
    count = (stop - start) / step if step else -1.0
    if count < 0 or abs(count - round(count)) > 1e-6 or count > 1e6:
        raise DataFault(f"{raw!r} does not go from its start to its stop in whole steps.")
    whole = round(count)
    return tuple(
        float(f"{start + (stop - start) * i / max(whole, 1):.12g}") for i in range(whole + 1)
    )


def _read_word(raw: object) -> ValueSource:
    if isinstance(raw, str):
        return ValueSource(value=raw)
    return _read_source(raw, unit="word", outer=True)


def _read_temperature(raw: object) -> ValueSource:
    if isinstance(raw, (str, int, float)) and not isinstance(raw, bool):
        return ValueSource(value=parse_quantity(raw, "degC"))
    return _read_source(raw, unit="degC", outer=True)


def _source_model(name: str, names: tuple[str, ...], *, outer: bool) -> type[Model]:
    """Build a model with one optional source for each name."""
    annotations: dict[str, Any] = {}
    defaults: dict[str, Any] = {}
    for entry in names:
        read = partial(_read_source, unit=QUANTITIES[entry].unit, outer=outer)
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


class _Sweep(Model):
    files: Text | tuple[Text, ...]
    device: Text
    polarity: Literal["n", "p"]
    width: Length
    fingers: Count = 1
    corner: Annotated[ValueSource, Parsed(_read_word)] = ValueSource(value="tt")
    temperature: Annotated[ValueSource, Parsed(_read_temperature)] = ValueSource(value=27.0)
    nominal: Flag = False
    netlist: Annotated[str | None, Parsed(_read_netlist)] = None
    layout: Text = "auto"
    columns: tuple[Text, ...] = ()
    suffixes: Literal["spice", "si"] | None = None
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
