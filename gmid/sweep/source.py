"""Opens one sweep file, plain or gzip, whatever its encoding, and streams it as UTF-8 bytes.

Content decides, never the extension.  What cannot be text of a sweep (an empty or binary
file, an archive, a compressed bomb, an endless line) is refused here with words.
"""

from __future__ import annotations

import gzip
import hashlib
import io
import re
import zlib
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from functools import partial
from pathlib import Path
from typing import BinaryIO

from gmid.errors import DataFault, FileTrouble
from gmid.sweep.byte_places import count_bytes
from gmid.sweep.bytestream import BLOCK, HEAD, ByteStream, Limits, RawTap, Readable

_ARCHIVES = {
    b"PK\x03\x04": "a zip archive", b"\xfd7zXZ": "an xz archive", b"BZh": "a bzip2 archive",
    b"\x28\xb5\x2f\xfd": "a zstd archive", b"\x89HDF": "an HDF5 file", b"%PDF": "a PDF document",
}  # fmt: skip
_BOMS = (
    (b"\xff\xfe\0\0", "utf-32-le"), (b"\0\0\xfe\xff", "utf-32-be"),
    (b"\xef\xbb\xbf", "utf-8"), (b"\xff\xfe", "utf-16-le"), (b"\xfe\xff", "utf-16-be"),
)  # fmt: skip
_CONTROL = bytes(set(range(32)) - set(b"\t\n\r\f\v\x1a"))


@dataclass(eq=False)
class TextSource:
    r"""A text file of sweep data, recognised as text but not yet read.

    Parameters
    ----------
    opener : callable
        Opens the stored bytes at their start.
    name : str
        The file as the user named it, for messages.
    encoding : str
        ``utf-8`` (or plain ASCII), ``latin-1``, ``utf-16-le``, ``utf-16-be``; ``binary`` for a
        raw file whose values are no text.
    head : str
        The first 64 kB, decoded, without byte-order mark, lines ending in ``\n``.
    head_is_all : bool
        Whether `head` is the whole file.
    packed : bool
        Whether the file is compressed with gzip.
    limits : Limits
        Bounds on unpacked size, compression ratio and line length.
    carriage : bool
        Whether lines end in carriage returns alone.

    Examples
    --------
    >>> open_bytes(b"vgs,id\n0,1e-12\n", name="a.csv").head_lines()
    ['vgs,id', '0,1e-12']
    """

    opener: Callable[[], BinaryIO] = field(repr=False)
    name: str
    encoding: str
    head: str = field(repr=False)
    head_is_all: bool
    packed: bool = False
    limits: Limits = field(default_factory=Limits)
    carriage: bool = False
    _digest: str | None = field(default=None, repr=False)

    def stream(self) -> ByteStream:
        r"""Open the file from its start as a stream of UTF-8 bytes with ``\n`` line ends.

        Returns
        -------
        ByteStream
            To be closed, or used in a ``with`` statement.  The first one that is read to its
            end also finds the checksum.
        """
        tap = RawTap(self.opener(), hashed=self._digest is None)
        unpacked: Readable = tap
        if self.packed:
            unpacked = gzip.GzipFile(fileobj=tap, mode="rb")  # type: ignore[call-overload]
        return ByteStream(
            unpacked, tap, name=self.name, encoding=self.encoding, packed=self.packed,
            limits=self.limits, carriage=self.carriage, on_digest=self._keep_digest,
            recount=self._count_lines,
        )  # fmt: skip

    def _count_lines(self, size: int) -> int:
        """Count line feeds among so many first bytes of the stream."""
        lines = 0
        with self.stream() as stream:
            while size > 0 and (block := stream.take()):
                lines += count_bytes(block[:size])
                size -= len(block)
        return lines

    def lines(self, first: int = 1) -> Iterator[tuple[int, str]]:
        """Iterate over the lines with their numbers, decoded, without line ends.

        Parameters
        ----------
        first : int
            Number of the first line to yield, from 1.

        Yields
        ------
        tuple of (int, str)
            Line number and text.  Bytes that are no UTF-8 are taken as Latin-1.
        """
        for number, lines in self.chunks():
            if number + len(lines) > first:
                yield from enumerate(lines[max(first - number, 0) :], max(first, number))

    def chunks(self) -> Iterator[tuple[int, list[str]]]:
        """Iterate over the lines, many at a time.

        Yields
        ------
        tuple of (int, list of str)
            Number of the first line and the lines, as from `lines`.
        """
        with self.stream() as stream:
            number, carry = 1, b""
            while block := stream.read():
                cut = block.rfind(b"\n") + 1
                if not cut:
                    carry += block
                    continue
                lines = _decode_lines(carry + block[: cut - 1])
                yield number, lines
                number, carry = number + len(lines), block[cut:]
            if carry:
                yield number, [decode_line(carry)]

    def head_lines(self) -> list[str]:
        """Whole lines of the head; the last one is left out when the head may have cut it.

        Returns
        -------
        list of str
            Without line ends.
        """
        lines = self.head.split("\n")
        if not self.head_is_all or lines[-1] == "":
            lines.pop()
        return lines

    @property
    def sha256(self) -> str:
        """Checksum of the bytes of the file as stored, in hexadecimal."""
        if self._digest is None:
            with self.opener() as file:
                found = hashlib.sha256()
                while block := file.read(BLOCK):
                    found.update(block)
                self._digest = found.hexdigest()
        return self._digest

    def where(self, line: int) -> str:
        """Place of a line as ``file:line``.

        Parameters
        ----------
        line : int
            Line number, from 1.

        Returns
        -------
        str
            For the `where` of an error.
        """
        return f"{self.name}:{line}"

    def _keep_digest(self, digest: str) -> None:
        self._digest = digest


def open_source(
    path: str | Path, *, name: str | None = None, limits: Limits | None = None
) -> TextSource:
    """Look at the start of a file and say what kind of text it is.

    Parameters
    ----------
    path : str or Path
        The file, plain or gzip.
    name : str, optional
        Name for messages; the path if not given.
    limits : Limits, optional
        Bounds on what is read.

    Returns
    -------
    TextSource
        Ready for `gmid.sweep.readers.read_text`.

    Raises
    ------
    FileTrouble
        If the file cannot be opened.
    DataFault
        If it is empty, binary, an archive or damaged.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     file = Path(folder) / "a.txt"
    ...     _ = file.write_bytes(b"")
    ...     open_source(file, name="a.txt")
    Traceback (most recent call last):
    ...
    gmid.errors.DataFault: a.txt: the file is empty. Did the simulation run to its end?
    """
    name = str(path) if name is None else name
    return _look(partial(_open_raw, Path(path), name), name, limits or Limits())


def open_bytes(data: bytes, *, name: str, limits: Limits | None = None) -> TextSource:
    r"""Treat bytes in memory as a sweep file.

    Parameters
    ----------
    data : bytes
        What the file would hold.
    name : str
        Name for messages.
    limits : Limits, optional
        Bounds on what is read.

    Returns
    -------
    TextSource
        As from `open_source`.

    Raises
    ------
    DataFault
        If it is empty, binary, an archive or damaged.

    Examples
    --------
    >>> open_bytes("id (\u00b5A)\n1\n".encode("utf-16"), name="a.csv").encoding
    'utf-16-le'
    """
    return _look(partial(io.BytesIO, data), name, limits or Limits())


def _look(opener: Callable[[], BinaryIO], name: str, limits: Limits) -> TextSource:
    """Judge the start of a file."""
    with opener() as file:
        start = file.read(HEAD)
    if not start:
        raise DataFault("the file is empty.", where=name, hint="Did the simulation run to its end?")
    for magic, what in _ARCHIVES.items():
        if start.startswith(magic):
            raise DataFault(
                f"this is {what}, not text.", where=name,
                hint="Give the text itself, plain or packed with gzip.",
            )  # fmt: skip
    packed = start.startswith(b"\x1f\x8b")
    head, is_all = _unpack_head(opener, name) if packed else (start, len(start) < HEAD)
    encoding = _find_encoding(head, name)
    text = _decode_head(head, encoding, is_all)
    if not text.strip() and is_all:
        raise DataFault(
            "the file holds nothing but blanks.", where=name,
            hint="Did the simulation run to its end?",
        )  # fmt: skip
    carriage = "\r" in text and "\n" not in text
    text = text.replace("\r", "\n") if carriage else text
    return TextSource(opener, name, encoding, text, is_all, packed, limits, carriage)


def decode_line(line: bytes) -> str:
    r"""Decode one line as UTF-8, or as Latin-1 where it is not.

    Parameters
    ----------
    line : bytes
        Without the line feed; a carriage return at its end is dropped.

    Returns
    -------
    str
        The text.

    Examples
    --------
    >>> decode_line(b"id (\xb5A)\r")
    'id (µA)'
    """
    line = line.rstrip(b"\r")
    try:
        return line.decode()
    except UnicodeDecodeError:
        return line.decode("latin-1")


def _decode_lines(text: bytes) -> list[str]:
    """Decode lines at once, or one by one where some are no UTF-8."""
    try:
        lines = text.decode().split("\n")
    except UnicodeDecodeError:
        return [decode_line(line) for line in text.split(b"\n")]
    return [line.rstrip("\r") for line in lines] if b"\r" in text else lines


def _open_raw(path: Path, name: str) -> BinaryIO:
    try:
        return path.open("rb", buffering=0)
    except FileNotFoundError:
        raise FileTrouble("there is no such file.", where=name) from None
    except OSError as error:
        raise FileTrouble(
            f"the file cannot be opened: {(error.strerror or str(error)).lower()}.", where=name
        ) from error


def _unpack_head(opener: Callable[[], BinaryIO], name: str) -> tuple[bytes, bool]:
    """Unpack the first 64 kB."""
    try:
        with opener() as raw, gzip.open(raw, "rb") as file:
            head = file.read(HEAD)
    except (EOFError, OSError, zlib.error) as error:
        raise DataFault(
            f"the gzip file is damaged or cut off: {str(error).rstrip('.').lower()}.", where=name,
            hint="Copy it again.",
        ) from error  # fmt: skip
    if not head:
        raise DataFault("the gzip file holds nothing.", where=name)
    return head, len(head) < HEAD


def _find_encoding(head: bytes, name: str) -> str:
    """Tell the encoding of the head, or refuse it as binary."""
    for bom, encoding in _BOMS:
        if head.startswith(bom):
            return encoding
    if re.match(rb"Title:[^\0]*^Variables:[^\0]*^Binary:", head, re.DOTALL | re.MULTILINE):
        return "binary"
    nulls = head.count(b"\0")
    if nulls > 0.3 * len(head):
        if head[0::2].count(b"\0") == 0:
            return "utf-16-le"
        if head[1::2].count(b"\0") == 0:
            return "utf-16-be"
    if nulls or len(head) - len(head.translate(None, _CONTROL)) > 0.02 * len(head):
        raise DataFault(
            "the file is binary, not text.", where=name,
            hint="Have the simulator write its results as text.",
        )  # fmt: skip
    try:
        head[: max(len(head) - 4, 1)].decode()
    except UnicodeDecodeError as error:
        if error.end < len(head) - 4 or error.reason != "unexpected end of data":
            return "latin-1"
    return "utf-8"


def _decode_head(head: bytes, encoding: str, is_all: bool) -> str:
    """Decode the head; a character cut in two at its end is left out."""
    for bom, _ in _BOMS:
        if encoding != "latin-1" and head.startswith(bom):
            head = head[len(bom) :]
            break
    if encoding == "binary":
        text = head[: re.search(rb"^Binary:", head, re.MULTILINE).end()].decode("latin-1")  # type: ignore[union-attr]
    elif encoding == "utf-8" and is_all:
        text = head.decode("utf-8", errors="replace")
    else:
        text = head.decode(encoding, errors="ignore")
    text = text.replace("\r\n", "\n")
    return text if is_all else text.rstrip("\r")
