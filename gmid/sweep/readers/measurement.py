"""Layout ``measurement``: results of measure statements, wrapped rows or ``name = value``."""

from __future__ import annotations

import re
from collections.abc import Iterator

from gmid.errors import DataFault
from gmid.sweep.numbers import is_missing, is_number
from gmid.sweep.readers.careful import FaultList
from gmid.sweep.readers.gather import MOST_COLUMNS, Gather, check_tables
from gmid.sweep.source import TextSource
from gmid.sweep.texttable import TextTable

LAYOUT = "measurement"

_LAST = "alter#"
_ENTRY = re.compile(r"\s*(?P<name>[^\s=]+)\s*=\s*(?P<value>\S+)")


def recognise(head: str) -> float:
    r"""Judge whether a text is a measurement table.

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
    >>> recognise("$DATA1 SOURCE='a'\n.TITLE 't'\n index l alter#\n 1 2 1\n")
    0.98
    """
    begins = head.lstrip().upper().startswith("$DATA1")
    if re.search(r"(?:^|\s)alter#(?:\s|$)", head, re.I):
        return 0.98 if begins else 0.9
    vertical = re.search(r"^\s*index\s*=\s*1(?:\.0*)?\s*$", head, re.M | re.I)
    return 0.85 if vertical else 0.6 if begins else 0.0


def read(source: TextSource, *, suffixes: str = "spice") -> list[TextTable]:
    r"""Read a measurement table.

    Parameters
    ----------
    source : TextSource
        The file.
    suffixes : {'spice', 'si'}
        Dialect of the suffixes of numbers.

    Returns
    -------
    list of TextTable
        One table, a row for each set of results; ``meta["title"]`` is the title.

    Raises
    ------
    DataFault or Faults
        If a result is missing or failed, or a row is incomplete.

    Examples
    --------
    >>> from gmid.sweep.source import open_bytes
    >>> text = b"$DATA1\n.TITLE 'n'\n index lch\n id alter#\n 1 1.8e-07\n 1e-05 1\n"
    >>> table = read(open_bytes(text, name="a.mt0"))[0]
    >>> table.names, table.column("id").values.tolist(), table.line_of(0)
    (['index', 'lch', 'id', 'alter#'], [1e-05], 5)
    """
    titles: list[str] = []
    faults = FaultList(source)
    if _LAST in source.head.lower():
        rows = _read_rows(source, _body(source, titles), faults, suffixes)
    else:
        rows = _read_records(source, _body(source, titles), faults, suffixes)
    faults.finish()
    title = " ".join(re.sub(r"^\.TITLE\s*", "", text, flags=re.I).strip("'\"") for text in titles
                     if text.upper().startswith(".TITLE"))  # fmt: skip
    meta = {"title": title, "header": " ".join(titles)}
    return check_tables(source, [rows.table(LAYOUT, meta, units={})])


def _body(source: TextSource, titles: list[str]) -> Iterator[tuple[int, str]]:
    """Iterate over the lines that are no titles or comments; the first titles are kept."""
    for number, text in source.lines():
        stripped = text.strip()
        if stripped[:1] in ("$", "."):
            if len(titles) < 20:
                titles.append(stripped)
        elif stripped and not stripped.startswith("*"):
            yield number, stripped


def _words(body: Iterator[tuple[int, str]]) -> Iterator[tuple[int, str]]:
    for number, text in body:
        for word in text.split():
            yield number, word


def _read_rows(
    source: TextSource, body: Iterator[tuple[int, str]], faults: FaultList, suffixes: str
) -> Gather:
    """Read names until the last one, then rows of as many words."""
    words = _words(body)
    names: list[str] = []
    for number, word in words:
        if is_number(word, suffixes=suffixes) or len(names) > MOST_COLUMNS:
            raise DataFault(
                f"expected names up to {_LAST!r}, found {word!r}.", where=source.where(number),
                hint="The file is damaged: write it again.",
            )  # fmt: skip
        names.append(word)
        if word.lower() == _LAST:
            break
    rows = Gather(source, names, faults, suffixes=suffixes)
    cells: list[str] = []
    start = 0
    for number, word in words:
        start = start if cells else number
        if not (is_number(word, suffixes=suffixes) or is_missing(word)):
            faults.add(number, f"expected a number for {names[len(cells)]!r}, found {word!r}.",
                       "The file is damaged: write it again.")  # fmt: skip
            break
        cells.append(word)
        if len(cells) == len(names):
            rows.add(start, cells)
            cells = []
        if faults.is_full:
            break
    if cells and not faults.any:
        faults.add(start, f"the last row has {len(cells)} of {len(names)} values.",
                   "The file is cut off: copy or write it again.")  # fmt: skip
    return rows


def _read_records(
    source: TextSource, body: Iterator[tuple[int, str]], faults: FaultList, suffixes: str
) -> Gather:
    """Read records of ``name = value`` lines, each beginning with the index."""
    records: list[tuple[int, dict[str, str]]] = []
    for number, text in body:
        match = _ENTRY.match(text)
        if match is None:
            continue
        name, value = match["name"], match["value"]
        if name.lower() == "index":
            records.append((number, {}))
        if not records:
            raise DataFault(
                f"expected 'index = ...' before {name!r}.", where=source.where(number),
                hint="Each record must begin with its index.",
            )  # fmt: skip
        if name in records[-1][1]:
            faults.add(number, f"{name!r} stands twice in one record.",
                       "The file is damaged: write it again.")  # fmt: skip
        records[-1][1][name] = value
    if not records:
        raise DataFault(
            "no names and values of measurements were found.", where=source.name,
            hint="Check the layout.",
        )  # fmt: skip
    names = list(records[0][1])
    rows = Gather(source, names, faults, suffixes=suffixes)
    for number, record in records:
        missing = [name for name in names if name not in record]
        extra = [name for name in record if name not in names]
        if missing or extra:
            faults.add(
                number, f"the record {'lacks ' + repr(missing[0]) if missing else ''}"
                f"{' and ' if missing and extra else ''}"
                f"{'has ' + repr(extra[0]) + ', which the first lacks' if extra else ''}.",
                "The file is damaged or cut off: write it again.",
            )  # fmt: skip
        else:
            rows.add(number, [record[name] for name in names])
        if faults.is_full:
            break
    return rows
