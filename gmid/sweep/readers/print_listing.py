"""Layout ``print-listing``: tables printed among the log lines of a run.

Pages of one table are put together again, and tables that were split for want of width are
joined by their Index.
"""

from __future__ import annotations

import re
from array import array
from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import partial

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault
from gmid.sweep.numbers import is_missing, is_number
from gmid.sweep.readers.careful import FaultList
from gmid.sweep.readers.common import drop_repeats
from gmid.sweep.readers.gather import Gather, check_tables
from gmid.sweep.readers.segments import read_frame
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import TextTable

LAYOUT = "print-listing"
UNNAMED = "scale"
"""Name given to a scale that the listing prints without one."""

_RULER = re.compile(r"\s*[-=]{8,}\s*")
_INDEX = re.compile(r"\s*Index\s+\S", re.IGNORECASE)
_COMPLEX = re.compile(r",\s+(?=[-+.\d])")
_TYPES = {"voltage": "v", "volt": "v", "current": "i", "volts": "v"}


def recognise(head: str) -> float:
    r"""Judge whether a text is a print listing.

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
    >>> recognise("-----------\nIndex   v-sweep   v(d)\n-----------\n0\t0.0\t0.3\n")
    0.95
    """
    if re.search(r"^\s*Index[ \t]+\S.*\n\s*[-=]{8,}", head, re.M | re.I):
        return 0.95
    if re.search(r"^\s*Index[ \t]+\S.*\n\s*\d+\s+\S", head, re.M | re.I):
        return 0.9
    if re.search(r"^x[ \t]*\n(?:.*\n){1,6}?\s*[-.\d]", head, re.M) and re.search(
        r"^y[ \t]*$", head, re.M
    ):
        return 0.85
    hashed = re.search(r"^[ \t]*#[ \t]+(?P<names>\S.*)\n[ \t]*(?P<row>[-+.\d].*)$", head, re.M)
    if hashed and len(hashed["names"].split()) + 1 == len(_split(hashed["row"])):
        return 0.9 if all(map(is_number, _split(hashed["row"]))) else 0.4
    return 0.0


def read(source: TextSource, *, suffixes: str = "spice") -> list[TextTable]:
    r"""Read the tables of a print listing.

    Parameters
    ----------
    source : TextSource
        The file.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    list of TextTable
        One for each run of the Index from 0.  ``meta["title"]`` holds the lines above the
        table; a scale without a name is called ``scale``.

    Raises
    ------
    DataFault or Faults
        If split tables do not fit each other, the Index has a gap, or a row is at fault.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> text = b"dc\n--------\nIndex v-sweep id\n--------\n0\t0.0\t1e-12\n1\t0.1\t2u\n"
    >>> table = read(open_bytes(text, name="a.lis"))[0]
    >>> table.names, table.column("id").values.tolist(), table.meta["title"]
    (['v-sweep', 'id'], [1e-12, 2e-06], 'dc')
    """
    reading = _Reading(source, suffixes)
    for number, lines in source.chunks():
        reading.take_lines(number, lines)
        if reading.faults.is_full:
            break
    return reading.finish()


def _split(text: str) -> list[str]:
    """Split at blanks; a complex cell stays one word, ``1u-2u`` becomes two."""
    joined = _COMPLEX.sub(",", text)
    return re.sub(r"(?<=[\d.A-Za-z])(?<![eEdD\d.][eEdD])-(?=[\d.])", " -", joined).split()


def _may_be_row(line: str) -> bool:
    """Tell whether a line begins with a digit."""
    return line[:1].isdecimal() or (line[:1].isspace() and line.lstrip()[:1].isdecimal())


def _find_end(lines: Sequence[str], place: int, header: str) -> int:
    """Find the next header that is another one."""
    for k in range(place, len(lines)):
        if lines[k] != header and _INDEX.match(lines[k]):
            return k
    return len(lines)


def _read_rows(lines: Sequence[str], width: int) -> NDArray[np.float64] | None:
    """Read rows of plain numbers, one a column; None where they are not such."""
    options = {"sep": r"\s+", "names": list(range(width)), "dtype": "float64"}
    frame = read_frame(("\n".join(lines).encode(),), **options)
    if frame is None or len(frame) != len(lines):
        return None
    rows: NDArray[np.float64] = frame.to_numpy().T
    return rows if np.isfinite(rows).all() else None


@dataclass
class _Page:
    """One piece of a table under one header."""

    names: list[str]
    rows: Gather
    title: str
    header_line: int
    indexed: bool
    index: array[int] = field(default_factory=partial(array, "q"))


class _Reading:
    """One pass over the lines: header, rows, end, and again."""

    def __init__(self, source: TextSource, suffixes: str) -> None:
        self.source, self.suffixes = source, suffixes
        self.faults = FaultList(source)
        self.groups: list[list[_Page]] = []
        self.page: _Page | None = None
        self.above: list[str] = []
        self.header = ""
        self.waiting: list[tuple[int, str]] | None = None
        self.last_row = 0

    def take_lines(self, number: int, lines: Sequence[str]) -> None:
        """Take lines: runs of plain rows at once, all others one by one."""
        is_row = [*map(_may_be_row, lines), False]
        rows: NDArray[np.float64] | None = None
        place = limit = done = 0
        while place < len(lines) and not self.faults.is_full:
            page = self.page
            if not is_row[place] or page is None or not page.indexed or self.waiting is not None:
                if not is_row[place] and _INDEX.match(lines[place]):
                    self.header = lines[place]
                self.take(number + place, lines[place])
                done += is_row[place]
                place += 1
                continue
            if place >= limit:
                limit, done = _find_end(lines, place, self.header), 0
                some = [lines[k] for k in range(place, limit) if is_row[k]]
                rows = _read_rows(some, len(page.names) + 1)
            taken = 0
            if rows is not None and len(rows) == len(page.names) + 1:
                stop = done + is_row.index(False, place) - place
                taken = self._take_run(number + place, page, rows[:, done:stop])
            if not taken:
                self.take(number + place, lines[place])
                taken = 1
            place, done = place + taken, done + taken

    def _take_run(self, number: int, page: _Page, rows: NDArray[np.float64]) -> int:
        """Take plain rows as far as their Index counts on, and tell how many these are."""
        first = int(rows[0, 0])
        if page.index and first != page.index[-1] + 1:
            return 0
        fits = rows[0] == first + np.arange(rows.shape[1])
        count = fits.size if fits.all() else int(fits.argmin())
        if not count:
            return 0
        if not page.index:
            self._place(number, page, first)
        page.index.extend(range(first, first + count))
        page.rows.extend(range(number, number + count), list(rows[1:, :count]))
        self.last_row = number + count - 1
        return count

    def take(self, number: int, text: str) -> None:
        """Take one line."""
        text = text.replace("\f", " ").rstrip()
        stripped = text.strip()
        if self.waiting is not None:
            self._take_marked(number, stripped)
        elif not stripped or _RULER.fullmatch(text):
            return
        elif stripped == "x":
            self.waiting, self.page = [], None
        elif stripped == "y":
            self.page = None
        elif _INDEX.match(text):
            self._begin(number, stripped.split()[1:], indexed=True)
        elif stripped.startswith("#") and len(stripped.split()) > 1:
            self._begin(number, [UNNAMED, *stripped.lstrip("#").split()], indexed=False)
        elif self.page is not None and self._is_row(stripped):
            self._row(number, stripped)
        else:
            self._other(number, stripped)

    def _take_marked(self, number: int, text: str) -> None:
        """Gather the header lines behind an ``x``."""
        assert self.waiting is not None
        if not text:
            return
        words = _split(text)
        if not all(is_number(word, suffixes=self.suffixes) or is_missing(word) for word in words):
            self.waiting.append((number, text))
            return
        names = _name_pairs([line for _, line in self.waiting[-2:]], len(words))
        if not names:
            raise DataFault(
                f"{len(words)} columns stand below a header of other length.",
                where=self.source.where(number), hint="Print the table wider.",
            )  # fmt: skip
        line, self.waiting = self.waiting[0][0], None
        self._begin(line, names, indexed=False)
        self._row(number, text)

    def _begin(self, number: int, names: list[str], *, indexed: bool) -> None:
        rows = Gather(self.source, names, self.faults, suffixes=self.suffixes, is_complex=True)
        self.page = _Page(names, rows, "\n".join(self.above[-4:]), number, indexed)
        self.above = []

    def _is_row(self, text: str) -> bool:
        if self.page is not None and self.page.indexed:
            return text.split(None, 1)[0].isdigit()
        word = _split(text)[0]
        return is_number(word, suffixes=self.suffixes) or is_missing(word)

    def _row(self, number: int, text: str) -> None:
        assert self.page is not None
        page, words = self.page, text.split()
        if len(words) != len(page.names) + page.indexed or "," in text:
            words = _split(text)
        if page.indexed:
            index = int(words.pop(0)[:12])
            if not page.index:
                self._place(number, page, index)
            elif index != page.index[-1] + 1:
                if index == 0 and len(words) == len(page.names):
                    self._begin(page.header_line, page.names, indexed=True)
                    page = self.page
                    self._place(number, page, index)
                else:
                    self.faults.add(
                        number, f"expected Index {page.index[-1] + 1}, found {index}.",
                        "Rows are missing or doubled: print the table again.",
                    )  # fmt: skip
            page.index.append(index)
        elif not page.rows.lines:
            self._place_unindexed(page)
        page.rows.add(number, words)
        self.last_row = number

    def _place(self, number: int, page: _Page, index: int) -> None:
        """Find out whether a page goes on, stands beside another or begins a new table."""
        last = self.groups[-1] if self.groups else []
        for earlier in last:
            if earlier.names == page.names and index == earlier.index[-1] + 1 and index:
                page.rows, page.index = earlier.rows, earlier.index
                last[last.index(earlier)] = page
                page.title = earlier.title
                return
        if index and not any(other.index and other.index[0] == index for other in last):
            self.faults.add(number, f"expected Index 0 in a new table, found {index}.",
                            "Rows are missing: print the table again.")  # fmt: skip
        repeats = any(earlier.names == page.names for earlier in last)
        if last and last[0].indexed and not repeats and page.names[0] == last[0].names[0]:
            last.append(page)
        else:
            self.groups.append([page])

    def _place_unindexed(self, page: _Page) -> None:
        last = self.groups[-1] if self.groups else []
        repeats = any(earlier.names == page.names for earlier in last)
        if last and not last[0].indexed and not repeats:
            last.append(page)
        else:
            self.groups.append([page])

    def _other(self, number: int, text: str) -> None:
        """Take a line that is no row: the table has ended, or is damaged."""
        words = _split(text)
        numbers = sum(is_number(word, suffixes=self.suffixes) for word in words)
        known = [page for group in self.groups[-1:] for page in group]
        page = self.page
        if page is not None and len(words) == len(page.names) + page.indexed and numbers > 1:
            self.faults.add(number, f"expected a row, found {text[:60]!r}.",
                            "The file is damaged: print the table again.")  # fmt: skip
            return
        if (
            page is None
            and known
            and words[0].isdigit()
            and numbers == len(words) > 1
            and any(len(words) == len(other.names) + 1 for other in known)
        ):
            self.faults.add(number, f"a row stands apart from its table: {text[:60]!r}.",
                            "The file is damaged: print the table again.")  # fmt: skip
            return
        self.page = None
        self.above.append(text)

    def finish(self) -> list[TextTable]:
        tables = [self._join(group) for group in _merge_parts(self.groups)]
        self.faults.finish()
        return check_tables(self.source, tables)

    def _join(self, group: list[_Page]) -> TextTable:
        """Put split tables side by side."""
        first = group[0]
        table = first.rows.table(LAYOUT)
        columns = list(table.columns)
        for page in group[1:]:
            other = page.rows.table(LAYOUT)
            same = other.rows == table.rows and (
                page.index == first.index if first.indexed
                else np.array_equal(other.columns[0].values, columns[0].values)
            )  # fmt: skip
            if not same:
                self.faults.add(
                    page.header_line, f"this part of the table has {other.rows} rows, the part in "
                    f"line {first.header_line} has {table.rows}, or their scales differ.",
                    "The file is cut off or damaged: print the table again.",
                )  # fmt: skip
                continue
            columns += other.columns
        kept, dropped = drop_repeats(columns)
        note = "\n".join(
            f"the part in line {page.header_line} prints no scale; it is joined by its title and "
            "Index." for page in group[1:] if page.names[0] != first.names[0]
        )  # fmt: skip
        meta = {"title": first.title, "note": note, "header": " ".join(first.names),
                "dropped": ", ".join(dropped)}  # fmt: skip
        return TextTable(
            table.source, [columns[j] for j in kept], first_line=table.first_line,
            lines=table.lines, meta={key: text for key, text in meta.items() if text},
            layout=LAYOUT,
        )  # fmt: skip


def _merge_parts(groups: Sequence[list[_Page]]) -> list[list[_Page]]:
    """Put later parts of a table that lack its scale to the first: same title, same Index."""
    merged: list[list[_Page]] = []
    for group in groups:
        last = merged[-1] if merged else []
        known = {name for page in last for name in page.names}
        if (
            last
            and all(page.indexed for page in (*last, *group))
            and not any(name in known for page in group for name in page.names)
            and last[0].title.split("\n")[-2:] == group[0].title.split("\n")[-2:] != [""]
            and all(page.index == last[0].index for page in group)
        ):
            last.extend(group)
        else:
            merged.append(list(group))
    return merged


def _name_pairs(lines: list[str], count: int) -> list[str]:
    """Join a line of types and a line of nodes to names such as ``i(vd)``."""
    words = [line.split() for line in lines]
    if len(words) == 2 and len(words[0]) == count and len(words[1]) == count - 1:
        kinds = [_TYPES.get(kind.lower(), kind.lower()) for kind in words[0][1:]]
        pairs = [f"{kind}({node})" for kind, node in zip(kinds, words[1], strict=True)]
        return [UNNAMED, *pairs]
    if words and len(words[-1]) == count:
        return words[-1]
    if words and len(words[-1]) == count - 1:
        return [UNNAMED, *words[-1]]
    return []
