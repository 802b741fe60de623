"""Layout ``operating-point``: records of device quantities, one record a bias point."""

from __future__ import annotations

import re

from gmid.errors import DataFault
from gmid.sweep.numbers import is_missing, is_number
from gmid.sweep.readers.careful import FaultList
from gmid.sweep.readers.gather import Gather, check_tables
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import TextTable

LAYOUT = "operating-point"

_ENTRY = re.compile(
    r"\s*(?P<name>[^\s=]+)\s*=\s*(?P<value>[^\s=]+)\s*(?P<unit>[A-Za-z/^\d]{1,8})?\s*"
)
_SIDE = re.compile(r"\s*device\s+\S", re.IGNORECASE)


def recognise(head: str) -> float:
    r"""Judge whether a text is an operating-point listing.

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
    >>> recognise("@m1[gm] = 5.2e-05\n@m1[gds] = 1e-06\n")
    0.8
    >>> recognise(" device  m1  m2\n gm 1e-5 2e-5\n")
    0.8
    """
    lines = [line for line in head.split("\n")[:400] if line.strip()]
    if any(map(_SIDE.match, lines)):
        return 0.8
    entries = sum(_entry(line) is not None for line in lines)
    if entries >= 2 and entries > 0.4 * len(lines):
        return 0.8
    pairs = sum(_pair(line) is not None for line in lines)
    return 0.75 if pairs >= 2 and pairs > 0.7 * len(lines) else 0.0


def read(
    source: TextSource, *, suffixes: str = "spice", record: str | None = None
) -> list[TextTable]:
    r"""Read an operating-point listing.

    Parameters
    ----------
    source : TextSource
        The file.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.
    record : str, optional
        Regular expression of the line that begins a record.  Without it a record ends where a
        name comes again.

    Returns
    -------
    list of TextTable
        One table, a row for each record.  Devices side by side give columns ``@m1[gm]``;
        ``meta["title"]`` holds the other lines.

    Raises
    ------
    DataFault or Faults
        If records do not hold the same names, or a value is missing or no number.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> text = b"vgs = 0.5\n@m1[gm] = 5u\n\nvgs = 0.6\n@m1[gm] = 6u\n"
    >>> table = read(open_bytes(text, name="op.txt"))[0]
    >>> table.names, table.column("@m1[gm]").values.tolist()
    (['vgs', '@m1[gm]'], [5e-06, 6e-06])
    """
    start = None if record is None else _compile(record)
    faults = FaultList(source)
    records = _Records(source, faults, suffixes)
    titles: list[str] = []
    devices: list[str] = []
    begun = False
    for number, text in source.lines():
        if not text.strip():
            continue
        begins = start is not None and start.search(text) is not None
        begun = begun or begins
        if _SIDE.match(text):
            devices = text.split()[1:]
            continue
        found = _side_entries(text, devices) or _found(text, faults, number)
        if not found:
            titles = [*titles, text.strip()][:20]
            devices = devices if not text.strip().strip("-=") else []
        for name, value in found:
            if begun or (start is None and name in records.entries):
                records.close()
                begun = False
            records.add(number, name, value)
        if faults.is_full:
            break
    records.close()
    faults.finish()
    meta = {"title": "\n".join(titles)}
    return check_tables(source, [] if records.rows is None else [
        records.rows.table(LAYOUT, meta, units={})
    ])  # fmt: skip


class _Records:
    """The record being read, and the rows made of those before it."""

    def __init__(self, source: TextSource, faults: FaultList, suffixes: str) -> None:
        self.source, self.faults, self.suffixes = source, faults, suffixes
        self.rows: Gather | None = None
        self.entries: dict[str, str] = {}
        self.start = 0

    def add(self, number: int, name: str, value: str) -> None:
        self.start = self.start if self.entries else number
        if name in self.entries:
            self.faults.add(
                number, f"{name!r} stands twice in one record.",
                "Give the pattern of the line that begins a record: record = '...'.",
            )  # fmt: skip
        self.entries[name] = value

    def close(self) -> None:
        """End the record: it must hold what the first one holds."""
        entries, self.entries = self.entries, {}
        if not entries or self.faults.is_full:
            return
        if self.rows is None:
            self.rows = Gather(self.source, list(entries), self.faults, suffixes=self.suffixes)
        names = self.rows.names
        lacking = [name for name in names if name not in entries]
        extra = [name for name in entries if name not in names]
        if lacking:
            self.faults.add(
                self.start, f"the record that begins here lacks {lacking[0]!r}.",
                "The file is cut off, or the start of a record is not found: record = '...'.",
            )  # fmt: skip
        elif extra:
            self.faults.add(
                self.start, f"the record that begins here has {extra[0]!r}, which the first lacks.",
                "Print the same quantities at every bias point.",
            )  # fmt: skip
        else:
            self.rows.add(self.start, [entries[name] for name in names])


def _compile(record: str) -> re.Pattern[str]:
    try:
        return re.compile(record)
    except re.error as trouble:
        raise DataFault(f"the pattern {record!r} is not valid: {trouble}.") from None


def _entry(text: str) -> tuple[str, str] | None:
    name, sign, value = text.partition("=")
    name, value = name.strip(), value.strip()
    plain = sign and name and value and not any(mark in name + value for mark in " =\t")
    if plain and (is_number(value) or is_missing(value)):
        return name, value
    match = _ENTRY.fullmatch(text)
    if match is None or not (is_number(match["value"]) or is_missing(match["value"])):
        return None
    return match["name"], match["value"]


def _pair(text: str) -> tuple[str, str] | None:
    words = text.split()
    if len(words) != 2 or is_number(words[0]) or words[0][0] in "#*!;%":
        return None
    return (words[0], words[1]) if is_number(words[1]) or is_missing(words[1]) else None


def _found(text: str, faults: FaultList, number: int) -> list[tuple[str, str]]:
    """Find the entry of a line; what looks like one and is none is a fault."""
    found = _entry(text) or _pair(text)
    if found is not None:
        return [found]
    damaged = re.fullmatch(r"\s*(@[^\s=]+)\s*=\s*(\S*)\s*", text)
    if damaged is not None:
        faults.add(number, f"expected a number for {damaged[1]!r}, found {damaged[2]!r}.",
                   "The file is damaged: print it again.")  # fmt: skip
    return []


def _side_entries(text: str, devices: list[str]) -> list[tuple[str, str]]:
    """Find the entries of a line under several devices."""
    words = text.split()
    if not devices or len(words) != len(devices) + 1 or is_number(words[0]):
        return []
    if not all(is_number(word) or is_missing(word) for word in words[1:]):
        return []
    return [
        (f"@{device}[{words[0]}]", word) for device, word in zip(devices, words[1:], strict=True)
    ]
