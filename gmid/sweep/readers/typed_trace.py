"""Layout ``typed-trace``: sections HEADER, TYPE, SWEEP, TRACE and VALUE with quoted names."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence

from gmid.errors import DataFault
from gmid.sweep.numbers import is_missing, is_number
from gmid.sweep.readers.careful import FaultList
from gmid.sweep.readers.gather import Gather, check_tables
from gmid.sweep.readers.trace_types import Types, read_types, unquote
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import TextTable

LAYOUT = "typed-trace"

_SECTIONS = ("HEADER", "TYPE", "SWEEP", "TRACE", "VALUE", "END")
_ENTRY = re.compile(r'\s*(?P<name>"(?:[^"\\]|\\.)*")\s*(?P<rest>.*)')
_PAIR = re.compile(r"\(\s*([^\s()]+)\s+([^\s()]+)\s*\)")


def recognise(head: str) -> float:
    r"""Judge whether a text is a typed trace.

    Parameters
    ----------
    head : str
        The start of the text.

    Returns
    -------
    float
        Confidence from 0 to 1.

    Examples
    --------
    >>> recognise('HEADER\n"PSFversion" "1.00"\nTYPE\n')
    0.99
    """
    if not re.match(r"\s*HEADER\s*$", head.split("\n", 1)[0]):
        return 0.0
    return 0.99 if '"PSFversion"' in head[:4000] else 0.8


def read(source: TextSource, *, suffixes: str = "spice") -> list[TextTable]:
    r"""Read a typed trace.

    Parameters
    ----------
    source : TextSource
        The file.
    suffixes : {'spice', 'si'}
        Dialect of suffixes, should there be any.

    Returns
    -------
    list of TextTable
        One table; an operating-point file gives one row, the fields of a record as
        ``device:field``.  ``meta["header"]`` has the header as ``name = value`` lines.

    Raises
    ------
    DataFault or Faults
        If a section is damaged, values are missing, or the file has no END.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> text = (b'HEADER\n"PSFversion" "1.00"\n"temp" 27.0\nTYPE\n"V" FLOAT DOUBLE PROP(\n'
    ...         b'"units" "V"\n)\nSWEEP\n"dc" "V"\nTRACE\n"d" "V"\nVALUE\n"dc" 0.0\n"d" 0.9\nEND\n')
    >>> table = read(open_bytes(text, name="dc.txt"))[0]
    >>> [(column.name, column.unit, column.values.tolist()) for column in table.columns]
    [('dc', 'V', [0.0]), ('d', 'V', [0.9])]
    >>> table.meta["header"]
    'PSFversion = 1.00\ntemp = 27.0'
    """
    lines = source.lines()
    sections: dict[str, list[tuple[int, str]]] = {}
    place = ""
    for number, text in lines:
        word = text.strip()
        if word in _SECTIONS:
            place = word
            if place == "VALUE":
                break
            sections.setdefault(place, [])
        elif not word:
            continue
        elif not place:
            raise DataFault(
                f"expected HEADER, found {word[:60]!r}.", where=source.where(number),
                hint="Is it another layout?",
            )  # fmt: skip
        else:
            sections[place].append((number, text))
    if place != "VALUE":
        raise DataFault(
            "there is no VALUE section.", where=source.name,
            hint="The file is cut off, or the run saved nothing.",
        )  # fmt: skip
    types = read_types(source, sections.get("TYPE", []))
    meta = {"header": "\n".join(_header(sections.get("HEADER", [])))}
    sweep = _declared(source, sections.get("SWEEP", []))
    traces = _declared(source, sections.get("TRACE", []))
    faults = FaultList(source)
    if sweep or traces:
        table = _Points(source, types, sweep, traces, faults, suffixes).run(lines, meta)
    else:
        table = _read_point(source, types, lines, faults, suffixes, meta)
    return check_tables(source, [table])


def _header(lines: list[tuple[int, str]]) -> list[str]:
    found = []
    for _, text in lines:
        match = _ENTRY.match(text)
        if match is not None:
            found.append(f"{unquote(match['name'])} = {unquote(match['rest'].strip())}")
    return found


def _declared(source: TextSource, lines: list[tuple[int, str]]) -> list[tuple[str, str]]:
    """List names and types of a section; members of a group follow it without more words."""
    found: list[tuple[str, str]] = []
    depth = 0
    for number, text in lines:
        if depth:
            depth += text.count("(") - text.count(")")
            continue
        match = _ENTRY.match(text)
        if match is None:
            raise DataFault(
                f"expected a quoted name, found {text.strip()[:60]!r}.",
                where=source.where(number), hint="The file is damaged.",
            )  # fmt: skip
        rest = match["rest"]
        if not rest.startswith("GROUP"):
            kind = _ENTRY.match(rest)
            found.append((unquote(match["name"]), "" if kind is None else unquote(kind["name"])))
        depth = rest.count("(") - rest.count(")")
    return found


class _Points:
    """The VALUE section of a sweep: each point begins with the sweep variable."""

    def __init__(
        self, source: TextSource, types: Types, sweep: Sequence[tuple[str, str]],
        traces: Sequence[tuple[str, str]], faults: FaultList, suffixes: str,
    ) -> None:  # fmt: skip
        declared = [*sweep, *traces]
        self.source, self.faults = source, faults
        self.names = [name for name, _ in declared]
        self.units = {name: types.units.get(kind) for name, kind in declared}
        self.rows = Gather(source, self.names, faults, suffixes=suffixes, is_complex=True)
        self.cells: list[str] = []
        self.known: dict[str, str] = {}
        self.start = 0

    def run(self, lines: Iterator[tuple[int, str]], meta: dict[str, str]) -> TextTable:
        ended, number = False, 0
        for number, text in lines:
            if text.strip() == "END":
                ended = True
                break
            if text.strip():
                self._line(number, text)
            if self.faults.is_full:
                break
        if self.cells:
            self._point()
        if not ended and not self.faults.is_full:
            self.faults.add(number, "the file has no END.",
                            "It is cut off: copy or write it again.")  # fmt: skip
        self.faults.finish()
        return self.rows.table(LAYOUT, meta, units=self.units)

    def _line(self, number: int, text: str) -> None:
        name, rest = self._taken_apart(text)
        if name is not None:
            if self.cells and name == self.names[0]:
                self._point()
            self.start = self.start if self.cells else number
            place = len(self.cells)
            known = name in self.units
            if known and (place >= len(self.names) or self.names[place] != name):
                wanted = repr(self.names[place]) if place < len(self.names) else "the next point"
                self.faults.add(number, f"expected {wanted}, found {name!r}.",
                                "Values are missing or doubled: write the file again.")  # fmt: skip
        self.cells += _PAIR.sub(r"\1,\2", rest).split() if "(" in rest else rest.split()

    def _taken_apart(self, text: str) -> tuple[str | None, str]:
        """Split a line into a name, if it has one, and values."""
        raw, quote, rest = text.rpartition('" ')
        name = self.known.get(raw)
        if name is not None and quote:
            return name, rest
        match = _ENTRY.match(text)
        if match is None:
            return None, text
        name = unquote(match["name"])
        if name in self.units:
            self.known[match["name"][:-1]] = name
        return name, match["rest"]

    def _point(self) -> None:
        if len(self.cells) != len(self.names):
            self.faults.add(
                self.start, f"the point that begins here has {len(self.cells)} values for "
                f"{len(self.names)} names.", "The file is damaged or cut off: write it again.",
            )  # fmt: skip
        else:
            self.rows.add(self.start, self.cells)
        self.cells, self.start = [], 0


def _read_point(
    source: TextSource, types: Types, lines: Iterator[tuple[int, str]], faults: FaultList,
    suffixes: str, meta: dict[str, str],
) -> TextTable:  # fmt: skip
    """Read an operating point: one value or one record of values for each name."""
    names: list[str] = []
    cells: list[str] = []
    units: dict[str, str | None] = {}
    first, number, ended = 0, 0, False
    body: list[tuple[int, str]] = []
    for number, text in lines:
        if text.strip() == "END":
            ended = True
            break
        body.append((number, text))
    position = 0
    while position < len(body):
        number, text = body[position]
        position += 1
        match = _ENTRY.match(text)
        if match is None:
            continue
        first = first or number
        name, kind = unquote(match["name"]), _ENTRY.match(match["rest"])
        fields = None if kind is None else types.records.get(unquote(kind["name"]))
        if fields is None:
            word = (match["rest"] if kind is None else kind["rest"]).strip()
            if is_number(word) or is_missing(word) or _PAIR.fullmatch(word):
                names.append(name)
                cells.append(_PAIR.sub(r"\1,\2", word))
                units[name] = None if kind is None else types.units.get(unquote(kind["name"]))
            continue
        values: list[str] = []
        while position < len(body) and not body[position][1].strip().startswith(")"):
            values += _PAIR.sub(r"\1,\2", body[position][1]).split()
            position += 1
        depth = 1
        while position < len(body) and depth > 0:
            text = re.sub(r'"(?:[^"\\]|\\.)*"', "", body[position][1])
            depth += text.count("(") - text.count(")")
            position += 1
        if len(values) != len(fields):
            faults.add(number, f"the record {name!r} has {len(values)} values for {len(fields)} "
                       "fields.", "The file is damaged or cut off: write it again.")  # fmt: skip
            continue
        for (field, unit), value in zip(fields, values, strict=True):
            if not value.startswith('"'):
                names.append(f"{name}:{field}")
                cells.append(value)
                units[names[-1]] = unit
    if not ended:
        faults.add(number, "the file has no END.", "It is cut off: copy or write it again.")
    rows = Gather(source, names, faults, suffixes=suffixes, is_complex=True)
    if names:
        rows.add(first, cells)
    faults.finish()
    return rows.table(LAYOUT, meta, units=units)
