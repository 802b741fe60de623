"""Broken and foreign texts: each gets its own message, and mutated ones never more than that."""

from __future__ import annotations

import gzip
import random
import re
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from builders import RECIPE
from gmid.errors import GmidError
from gmid.sweep.drafting import draft_recipe
from gmid.sweep.importing import import_recipe
from gmid.sweep.inspecting import inspect_source
from gmid.sweep.readers import read_text
from gmid.sweep.recipe_file import read_recipe
from gmid.sweep.source import Limits, open_bytes
from layouts.writers import CASES, FOLDER

SAMPLES = {
    f"{name}/{file}": data
    for name, (_, files) in ((name, make()) for name, make in CASES.items())
    for file, data in files.items()
}


def sample(name: str) -> bytes:
    return next(data for key, data in SAMPLES.items() if key.startswith(name))


def swap(old: bytes, new: bytes, count: int = 1) -> Callable[[bytes], bytes]:
    def change(data: bytes) -> bytes:
        assert old in data
        return data.replace(old, new, count)

    return change


def without_line(number: int) -> Callable[[bytes], bytes]:
    def change(data: bytes) -> bytes:
        lines = data.splitlines(keepends=True)
        return b"".join(lines[: number - 1] + lines[number:])

    return change


def upto(mark: bytes, *, past: int = 0) -> Callable[[bytes], bytes]:
    return lambda data: data[: data.rindex(mark) + past]


BROKEN: dict[str, tuple[str, Callable[[bytes], bytes], str]] = {
    "zip": ("csv-units", lambda d: b"PK\x03\x04" + d, "this is a zip archive, not text"),
    "pdf": ("csv-units", lambda d: b"%PDF-1.4" + d, "this is a PDF document"),
    "binary": ("csv-units", lambda d: bytes(range(32)) * 50, "the file is binary, not text"),
    "empty": ("csv-units", lambda d: b"", "the file is empty"),
    "blank": ("csv-units", lambda d: b"\n \n\t", "nothing but blanks"),
    "log": ("csv-units", lambda d: b"run 1\nError: singular matrix\n", "no table but a log"),
    "prose": ("csv-units", lambda d: b"once upon a time\nthere was\n", "layout of the file is not"),
    "gzip cut": ("csv-units", lambda d: gzip.compress(d, mtime=0)[:200], "gzip file is damaged"),
    "csv text in number": ("csv-units", swap(b";300;", b";3oo;"),
         "expected a number for 'vgs.mV.'"),
    "csv nan": ("csv-units", swap(b";300;", b";nan;"),
         "the value of 'vgs.mV.' is missing: found 'nan'"),
    "csv field lost": ("csv-units", swap(b";300;", b";"), "expected 8 columns as in the header"),
    "csv header short": ("csv-units", swap(b";gmb\r", b"\r"),
         "expected 7 columns as in the header"),
    "csv cut": ("csv-utf16", lambda d: d[:-60], "expected 8 columns"),
    "csv second table": ("csv-column-blocks", lambda d: d + d, "a second table begins here"),
    "columns stars": ("columns-header", swap(b" 2.9999999999999999D-01", b" **********", 1),
                      "is missing: found '\\*+'"),
    "columns glued": ("columns-header", swap(b" -", b"-", 1), "expected 7 columns .* found 6"),
    "columns headless": ("columns-header", without_line(1), "the 7 columns have no header"),
    "columns scale": ("columns-bare", lambda d: d, "look like one scale that is repeated"),
    "raw header cut": ("spice-raw/", upto(b"Values:"), "there is no 'Values:' line"),
    "raw counts": ("spice-raw/", swap(b"No. Variables: 7", b"No. Variables: 6"),
                   "expected 6 variables as announced, found 7"),
    "raw points": ("spice-raw/", swap(b"No. Points: 28", b"No. Points: 30"),
                   "the header announces 30 points .line 6., found 28"),
    "raw no points": ("spice-raw/", lambda d: d[: d.index(b"Values:") + 8], "has no points"),
    "raw value lost": ("spice-raw/", without_line(17), "a new point begins while point 0 still"),
    "raw cut": ("spice-raw/", lambda d: d[:-40], "the last point is incomplete"),
    "raw failed": ("spice-raw/", swap(b"\t-0.0000000000000000e+00\n", b"\tfailed\n"),
                   "the value is missing for 'v.b.'"),
    "raw rubbish": ("spice-raw/", swap(b"Flags: real", b"Flagged"), "expected a header line"),
    "binary raw cut": ("spice-raw-binary", lambda d: d[:-4], "should have 28 points of 7 values"),
    "binary raw text": ("spice-raw-binary", lambda d: d + b"x" * 50,
         "expected a header line|no 'V"),
    "listing index gap": ("print-listing/", swap(b"\n3\t", b"\n4\t"), "expected Index 3, found 4"),
    "listing row lost": ("print-listing/", without_line(15), "expected Index"),
    "listing cell lost": ("print-listing/", swap(b"\t2.9999999999999999e-01", b""),
                          "expected 4 values as there are names, found 3"),
    "listing half": ("print-listing/", lambda d: d[: d.rindex(b"gmb") + 400],
                     "expected 4 values|this part of the table has"),
    "listing word": ("print-listing/", swap(b"\n1\t", b"\nl\t"), "expected a row, found 'l"),
    "listing suffix": ("print-listing-hash", swap(b" 6.36", b" 6..36"),
         "expected a number for 'id.m1.'"),
    "stepped run lost": ("stepped", swap(b"(Run: 3/16)", b"(Run: 4/16)"), "expected run 3 of 16"),
    "stepped end lost": ("stepped", upto(b"Step Information"), "the file ends after run 15 of 16"),
    "stepped line lost": ("stepped",
         swap(b"Step Information: L=180n Vsb=0m Vdd=300m  (Run: 2/16)\n",
                                          b""), "inside a run|expected run 2"),
    "stepped no names": ("stepped", without_line(1), "no line of names before the first run"),
    "stepped field": ("stepped", swap(b"e-01\t", b"e-01 "),
                      "expected 5 values|expected a number"),
    "trace no end": ("typed-trace", swap(b"END", b""), "the file has no END"),
    "trace no value": ("typed-trace", upto(b"VALUE"), "there is no VALUE section"),
    "trace value lost": ("typed-trace", lambda d: re.sub(rb'"M0:gm" \d\S+\n', b"", d, count=1),
                         "has 4 values for 5 names"),
    "trace bracket": ("typed-trace", swap(b'"units" "V"\n)', b'"units" "V"\n'),
         "is not closed|expected"),
    "trace number": ("typed-trace", swap(b'"dc" 2.9', b'"dc" x2.9'), "expected a number for 'dc'"),
    "measurement failed": ("measurement", swap(b"9.0000000000000002e-01", b"failed"),
                           "is missing: found 'failed'"),
    "measurement cut": ("measurement", upto(b"   2.7"), "the last row has|of 11 values"),
    "measurement word": ("measurement", swap(b"9.0000000000000002e-01", b"oops"),
                         "expected a number for .* found 'oops'"),
    "point lost": ("operating-point", without_line(5),
         "the record that begins here|which the first"),
    "point damaged": ("operating-point", swap(b"@m1[gm] = ", b"@m1[gm] = --x", 1),
                      "expected a number for '@m1.gm.'"),
    "point cut": ("operating-point", upto(b"@m1[gds]"), "begins here lacks '@m1.gds.'"),
    "blocks no names": ("blocks-comments",
         lambda d: d.replace(b"!     VGS     ID    GM    GDS   GMB\n", b""),
                        "have no names above them"),
    "blocks field": ("blocks-comments", swap(b"  6.0", b" x 6.0"), "expected 5 values"),
    "zones word": ("blocks-zones", swap(b"\n0.3 ", b"\n0.3 zone "), "expected 5 values|a number"),
    "blocks not closed": ("measured-blocks", upto(b"END_DB"), "is not closed"),
    "blocks rows": ("measured-blocks", without_line(17),
         "expected 7 rows as the header says of 'vg'"),
    "blocks names": ("measured-blocks", swap(b"#vg   id", b"vg   id"), "line of names that begins"),
    "blocks nested": ("measured-blocks", swap(b"END_DB\n", b""), "stands inside the block"),
}  # fmt: skip


@pytest.mark.parametrize("name", BROKEN)
def test_each_fault_has_its_message(name: str) -> None:
    which, change, words = BROKEN[name]
    with pytest.raises(GmidError, match=words) as caught:
        read_text(open_bytes(change(sample(which)), name="broken.txt"))
    assert all(line.startswith("broken.txt") for line in str(caught.value).splitlines())


def test_there_are_enough_of_them() -> None:
    assert len(BROKEN) >= 40


def test_bombs_are_refused_early() -> None:
    begin = time.perf_counter()
    bomb = gzip.compress(b"a,b\n" + b"0,0\n" * 8_000_000, mtime=0)
    with pytest.raises(GmidError, match="times its size"):
        read_text(open_bytes(bomb, name="bomb.gz"))
    for name in CASES:
        data = sample(name)
        where = data.index(b"\n", len(data) // 2 // 2 * 2) + 1
        long = data[:where] + b"1" * 1_500_000 + data[where:]
        with pytest.raises(GmidError):
            read_text(open_bytes(long, name="long.txt"))
        with pytest.raises(GmidError, match="longer than"):
            inspect_source(open_bytes(data, name="big.txt", limits=Limits(unpacked=len(data) // 2)))
    wide = ",".join(f"c{j}" for j in range(60_000)) + "\n" + ",".join(["1"] * 60_000) + "\n"
    with pytest.raises(GmidError, match=r"60000 columns|longer than|not recognised"):
        read_text(open_bytes(wide.encode(), name="wide.csv"))
    assert time.perf_counter() - begin < 15


def mutate(data: bytes, dice: random.Random) -> bytes:
    """Damage a file in one to four places."""
    for _ in range(dice.randint(1, 4)):
        at, size = dice.randrange(len(data) + 1), dice.randint(1, 40)
        kind = dice.randrange(7)
        if kind == 0:
            data = data[:at] + data[at + size :]
        elif kind == 1:
            data = data[:at] + dice.randbytes(size) + data[at:]
        elif kind == 2:
            data = data[:at] + data[max(at - 10 * size, 0) : at] + data[at:]
        elif kind == 3:
            data = data[:at]
        elif kind == 4:
            words = [b"nan", b"\n", b"\t", b" ", b"=", b"(",
                 b'"', b"*", b"#", b",", b"1e999", b"END\n",
                     b"VALUE\n", b"Title: x\n", b"Index\n", b"-", b"\r", b"x\n"]  # fmt: skip
            data = data[:at] + dice.choice(words) + data[at:]
        elif kind == 5:
            lines = data.split(b"\n")
            dice.shuffle(lines[: dice.randint(1, 12)])
            data = b"\n".join(lines[dice.randrange(len(lines)) :] + lines[:2])
        else:
            other = dice.choice(list(SAMPLES.values()))
            data = data[:at] + other[dice.randrange(len(other)) :][: 20 * size]
        data = data or b"x"
    return data


def test_mutated_files_end_in_words_or_tables() -> None:
    dice, names = random.Random(20260301), list(SAMPLES)
    end = time.perf_counter() + 12
    refused = read = 0
    while time.perf_counter() < end and refused + read < 1500:
        name = dice.choice(names)
        layout = dice.choice(["auto", "auto", name.split("/")[0]])
        layout = layout if layout in ("stepped", "measurement", "operating-point") else "auto"
        data = mutate(SAMPLES[name], dice)
        try:
            found = inspect_source(open_bytes(data, name="f.txt"), layout=layout)
            draft_recipe([found], folder=Path("."))
        except GmidError as fault:
            refused += 1
            told = str(fault)
        else:
            read += 1
            continue
        assert told.startswith("f.txt"), told
    assert refused > 100
    assert read > 20


def test_mutated_files_never_import_otherwise_than_with_words(tmp_path: Path) -> None:
    dice = random.Random(7)
    end = time.perf_counter() + 6
    for more, files in (make() for make in CASES.values()):
        recipe = RECIPE.format(files="FILES", more=more, device="n", polarity="n", process="ash90")
        listed = ", ".join(f"'{file}'" for file in files)
        (tmp_path / "r.toml").write_text(recipe.replace('"FILES"', f"[{listed}]"), encoding="utf-8")
        for file, data in files.items():
            (tmp_path / file).parent.mkdir(exist_ok=True)
            (tmp_path / file).write_bytes(data)
        victim, whole = next(iter(files.items()))
        for _ in range(6):
            if time.perf_counter() > end:
                break
            (tmp_path / victim).write_bytes(mutate(whole, dice))
            try:
                import_recipe(read_recipe(tmp_path / "r.toml"))
            except GmidError as fault:
                told = str(fault)
            else:
                continue
            assert told
    assert (FOLDER / "samples").is_dir()
