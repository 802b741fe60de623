"""Layout ``operating-point``: records of device quantities, one record a bias point."""

from __future__ import annotations

import re

from gmid.errors import DataFault
from gmid.sweep.numbers import is_missing, is_number
from gmid.sweep.readers.careful import FaultList
from gmid.sweep.readers.gather import Gather, check_tables
from gmid.sweep.readers.repeating import Model, ModelLine, model_line
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import TextTable

LAYOUT = "operating-point"

_ENTRY = re.compile(
    r"\s*(?P<name>[^\s=]+)\s*=\s*(?P<value>[^\s=]+)\s*(?P<unit>[A-Za-z/^\d]{1,8})?\s*"
)
_DAMAGED = re.compile(r"\s*(@[^\s=]+)\s*=\s*(\S*)\s*")
_TITLES = 20
_WORTH, _PATIENCE = 16, 256
"""Records that make a model pay, and records to wait where it did not."""

_SIDE = re.compile(r"\s*(?:device|element)\s+\S", re.IGNORECASE)


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
    listing = _Listing(source, None if record is None else _compile(record), suffixes)
    for first, lines in source.chunks():
        place = 0
        while place < len(lines) and not listing.faults.is_full:
            place += listing.skip(first, lines, place)
            listing.take(first + place, lines[place])
            place += 1
    return listing.finish()


class _Listing:
    """The listing while it is read: line by line, or by the model of a record that repeats.

    `devices` are those of the last line of devices, `_under` those when the record began.
    """

    def __init__(
        self, source: TextSource, start: re.Pattern[str] | None, suffixes: str
    ) -> None:  # fmt: skip
        self.source, self.start, self.suffixes = source, start, suffixes
        self.faults = FaultList(source)
        self.records = _Records(source, self.faults, suffixes)
        self.titles: list[str] = []
        self.devices: list[str] = []
        self.begun = False
        self._model: Model | None = None
        self._lines: list[ModelLine] = []
        self._under: list[str] = []
        self._known: set[str] = set()
        self._pause = 0

    def take(self, number: int, text: str) -> None:
        """Read one line with care."""
        if not text.strip():
            self._lines.append(ModelLine(text))
            return
        begins = self.start is not None and self.start.search(text) is not None
        self.begun = self.begun or begins
        found = []
        if _SIDE.match(text):
            self.devices = text.split()[1:]
        else:
            sides = _side_entries(text, self.devices)
            self._known.update(text.split()[:1] if sides else ())
            found = sides or _found(text, self.faults, number)
            if not sides:
                self._check_side(number, text)
            if not found:
                self.titles = [*self.titles, text.strip()][:_TITLES]
                if text.strip().strip("-=") and not self._is_named(text):
                    self.devices = []
        for name, value in found:
            if self._ends(name):
                self._close()
            if not self.records.entries:
                self._under = self.devices
            self.records.add(number, name, value)
        self._lines.append(model_line(text, found, begins=begins))

    def _is_named(self, text: str) -> bool:
        """Tell whether a line gives each device a word, such as the name of its model."""
        words = text.split()
        return len(words) == len(self.devices) + 1 and not any(map(is_number, words))

    def _check_side(self, number: int, text: str) -> None:
        """Refuse a quantity that was given for devices before and has none or others above it."""
        name, *words = text.split()
        numbers = sum(is_number(word) or is_missing(word) for word in words)
        if name in self._known and numbers and numbers == len(words):
            self.faults.add(
                number, f"expected {len(self.devices)} value(s) for {name!r}, as there are devices "
                f"above, found {numbers}.", "The file is damaged: print it again.",
            )  # fmt: skip

    def skip(self, first: int, lines: list[str], place: int) -> int:
        """Read records that repeat the one before, and tell how many lines they take.

        The last of them is left to be read with care, as is what follows it.
        """
        room = len(lines) - place >= 3 * len(self._lines)
        if self._pause or not room or not self._starts(lines[place]):
            return 0
        self._close()
        rows, model = self.records.rows, self._model
        if model is None or rows is None or sorted(model.names) != sorted(rows.names):
            return 0
        if model.has_words and len(self.titles) < _TITLES:
            return 0
        columns = dict(zip(model.names, model.read(lines, place), strict=True))
        count = columns[rows.names[0]].size - 1
        if count < _WORTH:
            self._pause, self._model = _PATIENCE, None
            return 0
        numbers = range(first + place, first + place + count * model.size, model.size)
        rows.extend(numbers, [columns[name][:count] for name in rows.names])
        return count * model.size

    def finish(self) -> list[TextTable]:
        """Give the table."""
        self.records.close()
        self.faults.finish()
        rows, meta = self.records.rows, {"title": "\n".join(self.titles)}
        return check_tables(
            self.source, [] if rows is None else [rows.table(LAYOUT, meta, units={})]
        )

    def _ends(self, name: str) -> bool:
        """Tell whether a value under a name is the first of a new record."""
        return self.begun or (self.start is None and name in self.records.entries)

    def _starts(self, text: str) -> bool:
        """Tell whether a line holds the first value of a new record, and the last was whole."""
        if not self.records.entries or not self._lines:
            return False
        first = next((line for line in self._lines if line.names), None)
        if first is None or not text.startswith(first.prefix) or self.devices != self._under:
            return False
        entries = _side_entries(text, self.devices) or [_entry(text) or _pair(text) or ("", "")]
        if tuple(name for name, _ in entries) != first.names:
            return False
        begins = self.start is not None and self.start.search(text) is not None
        return self.begun or begins or self._ends(first.names[0])

    def _close(self) -> None:
        """End the record, and make it the model of the next."""
        if self.records.entries:
            first = next(place for place, line in enumerate(self._lines) if line.names)
            self._model = Model(self._lines[first:], self._is_words, start=self.start,
                                suffixes=self.suffixes)  # fmt: skip
        self._lines = []
        self._pause = max(self._pause - 1, 0)
        self.records.close()
        self.begun = False

    def _is_words(self, text: str) -> bool:
        """Tell whether a line holds words that change nothing."""
        if _SIDE.match(text) or _DAMAGED.fullmatch(text) or self._known & {*text.split()[:1]}:
            return False
        entries = _entry(text) or _pair(text) or _side_entries(text, self.devices)
        return not entries


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
    damaged = _DAMAGED.fullmatch(text)
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
