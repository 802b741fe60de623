"""Drafts a recipe from what was seen in a file: certain things filled in, others asked.

A line that is not certain is a comment that begins with a question; a recipe whose questions
are open is refused by the import, key by key, and never guessed around.
"""

from __future__ import annotations

import json
import os
import re
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

from gmid.nomenclature import SWEEP_QUANTITIES
from gmid.sweep.inspecting import ColumnView, GroupView, Inspection
from gmid.sweep.readers.headers import is_unit
from gmid.sweep.readers.pairs import find_pairs

_LENGTH_NAME = re.compile(r"(?<![A-Za-z])[lL](\d+(?:[p.]\d+)?)(um|nm|u|n)?(?![A-Za-z0-9])")
_WORDS = {"nmos": "n", "nch": "n", "nfet": "n", "n": "n", "pmos": "p", "pch": "p", "pfet": "p",
          "p": "p"}  # fmt: skip
_PLACES = {"corner": ("corner",), "temperature": ("temperature", "temp", "temper", "t"),
           "device": ("device",), "polarity": ("polarity",), "width": ("width",),
           "fingers": ("fingers", "nf"), "length": ("length", "l")}  # fmt: skip


@dataclass
class _Draft:
    """Lines of one ``[[sweep]]``."""

    keys: list[str] = field(default_factory=list)
    axes: list[str] = field(default_factory=list)
    quantities: list[str] = field(default_factory=list)

    def text(self) -> str:
        lines = ["[[sweep]]", *self.keys]
        if self.axes:
            lines += ["", "[sweep.axes]", *self.axes]
        if self.quantities:
            lines += ["", "[sweep.quantities]", *self.quantities]
        return "\n".join(lines)


def draft_recipe(found: Sequence[Inspection], *, folder: Path) -> str:
    r"""Write the draft of a recipe for inspected files.

    Parameters
    ----------
    found : sequence of Inspection
        Files; those with the same layout and columns share a ``[[sweep]]``.
    folder : Path
        Where the recipe will stand; file names are written relative to it.

    Returns
    -------
    str
        TOML with questions as comments.

    Examples
    --------
    >>> from gmid.sweep.inspecting import inspect_source
    >>> from gmid.sweep.source import open_bytes
    >>> seen = inspect_source(open_bytes(b"vgs [V],id (uA)\n0,1\n0.5,2\n", name="a.csv"))
    >>> print(draft_recipe([seen], folder=Path(".")).split("[sweep.axes]")[1])
    <BLANKLINE>
    # vds?  nothing in the file tells it: vds = "COLUMN", or { value = "0.9 V" }
    # vsb?  nothing in the file tells it: vsb = "COLUMN", or { value = "0 V" }
    # length?  nothing in the file tells it: length = { value = "0.18 um" }
    <BLANKLINE>
    """
    sets: dict[tuple[str, tuple[str, ...]], list[Inspection]] = {}
    for entry in found:
        group = _main_group(entry)
        key = entry.layout, tuple(column.name for column in group.columns)
        sets.setdefault(key, []).append(entry)
    parts = ["format = 1", "", "[table]", *_process(found)]
    for entries in sets.values():
        devices = _devices(entries)
        for device in devices or (None,):
            parts += ["", _sweep(entries, folder, device).text()]
    return "\n".join(parts) + "\n"


def _process(found: Sequence[Inspection]) -> list[str]:
    columns = [c for entry in found for g in entry.groups for c in g.columns]
    named = [c for c in columns if c.name.lower() == "process" and c.kind == "words"]
    words = {named[0].words[0]} if named and len(named[0].words) == 1 else set()
    words |= {word for entry in found if (word := _pair(entry, ("process",))) is not None}
    if len(words) == 1:
        return [f"process = {_quote(words.pop())}"]
    return ['# process?  name the process: process = "..."']


def _main_group(entry: Inspection) -> GroupView:
    return max(entry.groups, key=lambda group: group.rows)


def _devices(entries: Sequence[Inspection]) -> tuple[str, ...]:
    """Words of a column of devices, where it has several."""
    for column in _main_group(entries[0]).columns:
        if column.role.name == "device" and column.kind == "words" and column.distinct > 1:
            words = [c.words for e in entries for c in _main_group(e).columns
                     if c.role.name == "device"]  # fmt: skip
            return tuple(dict.fromkeys(word for group in words for word in group))
    return ()


def _sweep(entries: Sequence[Inspection], folder: Path, device: str | None) -> _Draft:
    draft = _Draft()
    first, group = entries[0], _main_group(entries[0])
    names = [_quote(_relative(entry.name, folder)) for entry in entries]
    draft.keys.append(f"files = {names[0] if len(names) == 1 else '[' + ', '.join(names) + ']'}")
    runner = first.runner_up
    sure = first.confidence >= 0.8 or runner is None or first.confidence - runner[1] > 0.2
    doubt = "" if sure or runner is None else f"  # or {runner[0]}?"
    draft.keys.append(f"layout = {_quote(first.layout)}{doubt}")
    if not first.has_header:
        listed = ", ".join(f'"{column.name}"' for column in group.columns)
        draft.keys.append(f"# columns?  name them from left to right: columns = [{listed}]")
    if len(first.groups) > 1:
        plots = dict.fromkeys(t.meta.get("plot", t.meta.get("title", "")) for g in first.groups
                              for t in g.tables)  # fmt: skip
        draft.keys.append(f"# plots?  the file has tables of {len(first.groups)} kinds; keep some "
                          f"by a pattern: plots = {_quote(next(iter(plots)))}")  # fmt: skip
    _add_device(draft, first, group, device)
    _add_condition(draft, first, group)
    if first.has_header:
        _add_axes(draft, first, group)
        _add_quantities(draft, group)
    return draft


def _relative(name: str, folder: Path) -> str:
    path = Path(name)
    if path.is_absolute() or not folder.is_absolute():
        try:
            return Path(os.path.relpath(path.resolve(), folder.resolve())).as_posix()
        except ValueError:
            return path.as_posix()
    return path.as_posix()


def _pair(entry: Inspection, names: Sequence[str]) -> str | None:
    """Find ``name = value`` in comments and titles: the value with its unit."""
    table = _main_group(entry).tables[0]
    for key in ("comment", "title", "header"):
        for pair in find_pairs(table.meta.get(key, "")):
            if pair.name.lower() in names:
                value = pair.values[0]
                return f"{value} {pair.unit}".strip() if pair.unit else str(value)
    return None


def _by_role(group: GroupView, name: str) -> ColumnView | None:
    return next((c for c in group.columns if c.role.name == name and c.role.certain), None)


def _add_device(draft: _Draft, entry: Inspection, group: GroupView, device: str | None) -> None:
    column = _by_role(group, "device")
    word = device or _pair(entry, ("device",))
    if word is None and column is not None and len(column.words) == 1:
        word = column.words[0]
    if word is not None and re.fullmatch(r"[A-Za-z]\w*", word):
        draft.keys.append(f"device = {_quote(word)}")
    else:
        draft.keys.append('# device?  its name in the table: device = "nmos"')
    if device is not None and column is not None:
        draft.keys.append(f"rows = {{ {_quote(column.name)} = {_quote(device)} }}")
    polarity = _by_role(group, "polarity")
    told = _pair(entry, ("polarity",)) or (word or "").lower()
    if polarity is not None and len(polarity.words) == 1:
        told = polarity.words[0]
    if told.lower() in _WORDS:
        draft.keys.append(f"polarity = {_quote(_WORDS[told.lower()])}")
    else:
        draft.keys.append('# polarity?  n or p: polarity = "n"')
    _add_width(draft, entry, group)


def _add_width(draft: _Draft, entry: Inspection, group: GroupView) -> None:
    """Take a width that is called so; anything else may be that of one finger."""
    column, told = _by_role(group, "width"), _pair(entry, ("width",))
    if column is not None and column.kind == "real" and column.distinct == 1:
        unit = column.unit or "m"
        draft.keys.append(f'width = "{column.low:.12g} {unit}"')
    elif told is not None and " " in told:
        draft.keys.append(f'width = "{told}"')
    else:
        seen = next((c for c in group.columns if c.role.name == "width"), None)
        hint = f" (a column {seen.name!r} has {seen.low:g})" if seen and seen.low else ""
        draft.keys.append(f"# width?  total width of the simulated device, all fingers{hint}: "
                          'width = "2 um"')  # fmt: skip
    fingers = _by_role(group, "fingers")
    if fingers is not None and fingers.kind == "real" and fingers.distinct == 1:
        draft.keys.append(f"fingers = {fingers.low:.0f}")


def _add_condition(draft: _Draft, entry: Inspection, group: GroupView) -> None:
    corner, told = _by_role(group, "corner"), _pair(entry, _PLACES["corner"])
    if corner is not None:
        draft.keys.append(f"corner = {{ column = {_quote('`' + corner.name + '`')} }}")
    elif told is not None:
        draft.keys.append(f"corner = {_quote(told)}")
    else:
        draft.keys.append('# corner?  process corner of the models: corner = "tt"')
    heat, told = _by_role(group, "temperature"), _pair(entry, _PLACES["temperature"])
    if heat is not None and heat.kind == "real" and heat.unit in (None, "C", "degC"):
        draft.keys.append(f"temperature = {{ column = {_quote('`' + heat.name + '`')} }}")
    elif told is not None and told.endswith((" C", " degC")):
        draft.keys.append(f"temperature = {_quote(told)}")
    else:
        seen = f" (the file says {told}: in Celsius?)" if told is not None else ""
        draft.keys.append(f'# temperature?  of the simulation{seen}: temperature = "27 C"')


def _expression(column: ColumnView, sign: str = "") -> str:
    """Write a column as an expression, in back quotes where its name holds an operator."""
    plain = re.fullmatch(r"[A-Za-z_@][\w@\[\]().:#-]*", column.name)
    name = column.name if plain else f"`{column.name}`"
    return _quote(f"{sign}{name}")


def _add_axes(draft: _Draft, entry: Inspection, group: GroupView) -> None:
    nodes = {c.role.name[-1]: c for c in group.columns if c.role.name.startswith("node ")}
    for axis in ("vgs", "vds", "vsb", "length"):
        certain = [c for c in group.columns if c.role.name == axis and c.role.certain]
        devices = {c.role.device for c in certain}
        if len(devices) == 1 and not all(c.kind == "complex" for c in certain):
            standard = certain[0].name.lower() in (axis, "l" if axis == "length" else axis)
            if not standard:
                draft.axes.append(f"{axis} = {_expression(certain[0], certain[0].role.sign)}")
        elif axis == "length":
            draft.axes.append(_length_line(entry, group))
        elif (line := _node_line(axis, nodes)) is not None:
            draft.axes.append(line)
        else:
            draft.axes.append(_missing_axis(axis, group))


def _node_line(axis: str, nodes: dict[str, ColumnView]) -> str | None:
    """Write an axis as the difference of node voltages, certain when both were saved."""
    plus, minus = {"vgs": ("g", "s"), "vds": ("d", "s"), "vsb": ("s", "b")}[axis]
    if plus in nodes and minus in nodes:
        text = f"{_expression(nodes[plus])[1:-1]} - {_expression(nodes[minus])[1:-1]}"
        return f"{axis} = {_quote(text)}"
    if axis == "vsb" and "b" in nodes:
        return f"# vsb?  is the source at ground? then vsb = {_expression(nodes['b'], '-')}"
    if axis != "vsb" and plus in nodes:
        return f"# {axis}?  is the source at ground? then {axis} = {_expression(nodes[plus])}"
    return None


def _missing_axis(axis: str, group: GroupView) -> str:
    scales = [c for c in group.columns if c.role.name == "scale" and c.distinct > 1]
    if scales and axis == "vgs":
        return f"# vgs?  is {scales[0].name!r} the gate-source voltage? then vgs = " + _expression(
            scales[0]
        )
    if group.restarts > 1:
        return (
            f"# {axis}?  no column holds it, but the scale begins {group.restarts} times: "
            f'{axis} = {{ restart = "start:stop:step", unit = "V" }}, or {{ value = "0 V" }}'
        )
    value = "0 V" if axis == "vsb" else "0.9 V"
    return f'# {axis}?  nothing in the file tells it: {axis} = "COLUMN", or {{ value = "{value}" }}'


def _length_line(entry: Inspection, group: GroupView) -> str:
    devices = list(dict.fromkeys(c.role.device for c in group.columns if c.role.device))
    doubtful = [c for c in group.columns if c.role.name == "length" and c.low is not None]
    if len(devices) > 1:
        values = ", ".join(f'{device} = "? um"' for device in devices)
        return (
            f'# length?  of each device {", ".join(devices)}: length = {{ from = "column", '
            f"pattern = '@(\\w+)\\[', values = {{ {values} }} }}; then gm = \"@*[gm]\""
        )
    if doubtful:
        low, name = doubtful[0].low, doubtful[0].name
        return (f"# length?  in which unit is {name!r} (from {low:g})? length = "
                f'{{ column = "{name}", unit = "um" }}')  # fmt: skip
    for place in ("title", "comment", "step"):
        for pair in find_pairs(group.tables[0].meta.get(place, "")):
            if pair.name.lower() not in _PLACES["length"]:
                continue
            pattern = rf"\b{re.escape(pair.name)}\s*=\s*([\d.]+(?:e-?\d+)?)"
            if pair.unit is not None and is_unit(pair.unit):
                return (f"length = {{ from = \"{place}\", pattern = '{pattern}', "
                        f'unit = "{pair.unit}" }}')  # fmt: skip
            suffixed = rf"\b{re.escape(pair.name)}\s*=\s*([\d.]+(?:u|n))\b"
            if all(re.search(suffixed, t.meta.get(place, ""), re.I) for t in group.tables):
                return f"length = {{ from = \"{place}\", pattern = '{suffixed}' }}"
            return (f"# length?  in which unit is the {place}'s? length = {{ from = \"{place}\", "
                    f"pattern = '{pattern}', unit = \"um\" }}")  # fmt: skip
    match = _LENGTH_NAME.search(Path(entry.name).name)
    if match is not None:
        unit = f"{match[2].rstrip('m')}m" if match[2] else "um"
        line = f'length = {{ from = "name", pattern = \'[lL]([\\d.p]+)\', unit = "{unit}" }}'
        return line if match[2] else f"# length?  is it in um in the file's name? {line}"
    return '# length?  nothing in the file tells it: length = { value = "0.18 um" }'


def _add_quantities(draft: _Draft, group: GroupView) -> None:
    by_role: dict[str, list[ColumnView]] = {}
    for column in group.columns:
        by_role.setdefault(column.role.name, []).append(column)
    for name in SWEEP_QUANTITIES:
        if name not in by_role:
            continue
        column, role = by_role[name][0], by_role[name][0].role
        devices = {c.role.device for c in by_role[name]}
        if column.kind == "complex":
            draft.quantities.append(_complex_line(name, column))
        elif len(devices - {""}) > 1:
            draft.quantities.append(f"# {name}?  there are {', '.join(sorted(devices))}: say which "
                                    f"device has which length, see length")  # fmt: skip
        elif not role.certain:
            text = f"1/{_expression(column)[1:-1]}"
            draft.quantities.append(f"# {name}?  is {column.name!r} an output resistance? then "
                                    f"{name} = {_quote(text)}")  # fmt: skip
        elif column.name.lower() != name:
            draft.quantities.append(f"{name} = {_expression(column, role.sign)}")
    if "id" not in by_role:
        draft.quantities.append('# id?  the drain current: id = "COLUMN"')
    ratios = [c.name for c in by_role.get("ratio", [])]
    if ratios:
        draft.quantities.append(f"# not imported, being derived: {', '.join(ratios)}")
    unknown = [c.name for c in by_role.get("", []) if c.kind != "words"]
    if unknown:
        draft.quantities.append(f"# not used: {', '.join(unknown[:12])}")


def _complex_line(name: str, column: ColumnView) -> str:
    return (f"# {name}?  {column.name!r} is complex: give the admittance it is part of, such as "
            f'{name} = {{ admittance = "-i(vg)" }}')  # fmt: skip


def _quote(text: str) -> str:
    if "'" not in text and ('"' in text or "\\" in text) and text.isprintable():
        return f"'{text}'"
    return json.dumps(text, ensure_ascii=False)


def count_questions(draft: str) -> int:
    r"""Count the questions that a draft leaves open.

    Parameters
    ----------
    draft : str
        From `draft_recipe`.

    Returns
    -------
    int
        Comment lines that ask.

    Examples
    --------
    >>> count_questions("# width?  total width\nfingers = 1\n")
    1
    """
    return len(re.findall(r"^# \w+\?  ", draft, re.MULTILINE))
