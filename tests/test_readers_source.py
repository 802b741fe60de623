"""Opening of files: encodings, compression, bounds, refusals."""

from __future__ import annotations

import gzip
import hashlib
from pathlib import Path

import pytest

from gmid.errors import DataFault, FileTrouble
from gmid.sweep.bytestream import ByteStream, Limits, RawTap
from gmid.sweep.readers import read_text
from gmid.sweep.source import open_source

TEXT = "vgs (V),id (\u00b5A)\n0.0,1.5\n0.1,2.5\n"


@pytest.mark.parametrize(
    "data",
    [
        TEXT.encode(), TEXT.encode("utf-8-sig"), TEXT.encode("latin-1"), TEXT.encode("utf-16"),
        TEXT.encode("utf-16-le"), TEXT.encode("utf-16-be"), TEXT.replace("\n", "\r\n").encode(),
        TEXT.replace("\n", "\r").encode(), gzip.compress(TEXT.encode(), mtime=0),
        TEXT.rstrip("\n").encode(), TEXT.encode("utf-32"),
    ],
)  # fmt: skip
def test_every_encoding_reads_the_same(tmp_path: Path, data: bytes) -> None:
    file = tmp_path / "sweep.dat"
    file.write_bytes(data)
    source = open_source(file, name="sweep.dat")
    table = read_text(source)[0]
    assert [(column.name, column.unit) for column in table.columns] == [
        ("vgs", "V"), ("id", "\u00b5A")
    ]  # fmt: skip
    assert [column.values.tolist() for column in table.columns] == [[0.0, 0.1], [1.5, 2.5]]
    assert [table.line_of(row) for row in (0, 1)] == [2, 3]
    assert source.sha256 == hashlib.sha256(data).hexdigest()


def test_checksum_without_reading(tmp_path: Path) -> None:
    file = tmp_path / "a.csv"
    file.write_text(TEXT)
    assert open_source(file).sha256 == hashlib.sha256(TEXT.encode()).hexdigest()


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"", "is empty"), (b" \n\n\t\n", "nothing but blanks"), (b"\x00\x01\x02abc\x00", "binary"),
        (b"PK\x03\x04zip", "zip archive"), (bytes(range(1, 30)) * 20, "binary"),
        (gzip.compress(TEXT.encode(), mtime=0)[:20], "damaged or cut off"),
        (b"\x1f\x8b not gzip at all", "damaged or cut off"),
        (gzip.compress(b"", mtime=0), "holds nothing"),
    ],
)  # fmt: skip
def test_refusals(tmp_path: Path, data: bytes, words: str) -> None:
    file = tmp_path / "a.txt"
    file.write_bytes(data)
    with pytest.raises(DataFault, match=words) as caught:
        open_source(file, name="a.txt")
    assert str(caught.value).startswith("a.txt: ")
    assert caught.value.hint or "nothing" in words


def test_missing_file(tmp_path: Path) -> None:
    with pytest.raises(FileTrouble, match="no such file"):
        open_source(tmp_path / "none.csv")
    with pytest.raises(FileTrouble, match="cannot be opened"):
        open_source(tmp_path)


def test_compressed_bomb_is_refused_early(tmp_path: Path) -> None:
    file = tmp_path / "bomb.gz"
    file.write_bytes(gzip.compress(b"a,b\n" + b"0,0\n" * 12_000_000, mtime=0))
    with pytest.raises(DataFault, match="more than 200 times its size"):
        read_text(open_source(file))


def test_unpacked_bound(tmp_path: Path) -> None:
    file = tmp_path / "a.csv"
    file.write_text("a,b\n" + "0.5,0.25\n" * 1000)
    with pytest.raises(DataFault, match="longer than 5000 bytes"):
        read_text(open_source(file, limits=Limits(unpacked=5000)))


@pytest.mark.parametrize("packed", [False, True])
def test_endless_line_is_refused(tmp_path: Path, packed: bool) -> None:
    file = tmp_path / "a.csv"
    data = b"a,b\n1,2\n" + b"9" * 3_000_000 + b"\n"
    file.write_bytes(gzip.compress(data, 1, mtime=0) if packed else data)
    limits = Limits(ratio=1e9)
    with pytest.raises(DataFault, match="longer than 1000000 bytes") as caught:
        read_text(open_source(file, name="a.csv", limits=limits))
    assert caught.value.where == "a.csv:3"


def test_nul_bytes_far_inside(tmp_path: Path) -> None:
    file = tmp_path / "a.csv"
    file.write_bytes(b"a,b\n" + b"1,2\n" * 50_000 + b"1,\x00\n")
    with pytest.raises(DataFault, match="NUL byte") as caught:
        read_text(open_source(file, name="a.csv"))
    assert caught.value.where == "a.csv:50002"


def test_truncated_gzip_far_inside(tmp_path: Path) -> None:
    import random

    numbers = random.Random(1)
    data = "a,b\n" + "".join(f"{numbers.random()},{numbers.random()}\n" for _ in range(20_000))
    file = tmp_path / "a.csv.gz"
    file.write_bytes(gzip.compress(data.encode(), mtime=0)[:-1000])
    with pytest.raises(DataFault, match="damaged or cut off"):
        read_text(open_source(file))


def test_stream_lines_and_push_back(tmp_path: Path) -> None:
    file = tmp_path / "a.txt"
    file.write_bytes(b"one\ntwo\nthree")
    with file.open("rb") as raw:
        stream = ByteStream(raw, RawTap(raw, hashed=False), name="a.txt")
        assert stream.readline() == b"one\n"
        assert stream.line == 1
        stream.push_back(b"one\n")
        assert stream.line == 0
        assert [stream.readline(), stream.read(), stream.read()] == [b"one\n", b"two\nthree", b""]
        assert stream.line == 2
    assert list(open_source(file).lines(2)) == [(2, "two"), (3, "three")]
