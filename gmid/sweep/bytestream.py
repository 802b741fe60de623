"""A bounded stream of UTF-8 bytes: unpacks, transcodes, counts lines and finds the checksum.

It is handed to the number reader as it is, so that every byte is read once and no more than
a block is held.
"""

from __future__ import annotations

import codecs
import hashlib
import zlib
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import BinaryIO, Protocol

import numpy as np

from gmid.errors import DataFault, GmidError
from gmid.sweep.byte_places import count_bytes, find_bytes

BLOCK = 1 << 18
"""Small enough to stay in the processor's cache while it is hashed and checked."""
HEAD = 1 << 16
_END_MARK = b"\x1a"
"""Some writers still end a text with it."""

_RATIO_FROM = 1 << 24


@dataclass(frozen=True)
class Limits:
    """Bounds on what is read from one file.

    Parameters
    ----------
    unpacked : int
        Largest unpacked size in bytes.
    ratio : float
        Largest ratio of unpacked to packed bytes, judged from 16 MB on.
    line : int
        Longest line in bytes.

    Examples
    --------
    >>> Limits().line
    1000000
    """

    unpacked: int = 4 << 30
    ratio: float = 200.0
    line: int = 1_000_000


class Readable(Protocol):
    """What gives bytes and can be closed."""

    def read(self, size: int = -1, /) -> bytes:
        """Read at most `size` bytes.

        Parameters
        ----------
        size : int
            Bytes wanted; all when negative.
        """
        ...

    def close(self) -> None:
        """Close it."""


class RawTap:
    """The bytes of a file as stored, hashed while they pass.

    Parameters
    ----------
    file : binary file
        Open at its start.
    hashed : bool
        Whether to find the checksum.

    Examples
    --------
    >>> import io
    >>> tap = RawTap(io.BytesIO(b"abc"), hashed=True)
    >>> tap.read(10), tap.finish()[:8]
    (b'abc', 'ba7816bf')
    """

    def __init__(self, file: BinaryIO, *, hashed: bool) -> None:
        self._file = file
        self._hash = hashlib.sha256() if hashed else None
        self.count = 0
        self.size = file.seek(0, 2)
        file.seek(0)

    def read(self, size: int = -1) -> bytes:
        """Read at most `size` bytes.

        Parameters
        ----------
        size : int
            Bytes wanted; all when negative.

        Returns
        -------
        bytes
            Empty at the end.
        """
        data = self._file.read(size)
        self.count += len(data)
        if self._hash is not None:
            self._hash.update(data)
        return data

    def finish(self) -> str | None:
        """Read what is left and give the checksum.

        Returns
        -------
        str or None
            SHA-256 in hexadecimal, or None when it was not asked for.
        """
        if self._hash is None:
            return None
        while self.read(BLOCK):
            pass
        return self._hash.hexdigest()

    def close(self) -> None:
        """Close the file."""
        self._file.close()


class ByteStream:
    """Reads a file as UTF-8 bytes with bounded memory.

    Parameters
    ----------
    unpacked : Readable
        Gives the unpacked bytes.
    tap : RawTap
        The stored bytes below it.
    name : str
        The file, for messages.
    encoding : str
        Encoding of the unpacked bytes.
    packed : bool
        Whether the two differ.
    limits : Limits
        Bounds.
    carriage : bool
        Whether lines end in carriage returns alone.
    on_digest : callable
        Called with the checksum at the end of the file.
    recount : callable
        Counts the line feeds among so many first bytes of the stream, for messages after `take`.

    Attributes
    ----------
    line : int
        Line feeds handed out so far, but for those that `take` gave.
    tail : bytes
        The end of what was handed out, at least the last block.
    fault : GmidError or None
        What was raised while reading, for callers that lose exceptions on the way.
    """

    mode = "r"

    def __init__(
        self, unpacked: Readable, tap: RawTap, *, name: str, encoding: str = "utf-8",
        packed: bool = False, limits: Limits | None = None, carriage: bool = False,
        on_digest: Callable[[str], None] | None = None,
        recount: Callable[[int], int] | None = None,
    ) -> None:  # fmt: skip
        self._unpacked, self._tap, self._name = unpacked, tap, name
        self._packed, self._limits = packed, limits or Limits()
        self._encoding, self._carriage = encoding, carriage
        self._decoder = None
        if encoding not in ("utf-8", "latin-1", "binary"):
            self._decoder = codecs.getincrementaldecoder(encoding)()
        self._on_digest, self._recount = on_digest, recount
        self._is_counted = True
        self._total = self._run = self._handed = 0
        self._pending = b""
        self._at = 0
        self._ended = False
        self.line = 0
        self.tail = b""
        self.fault: GmidError | None = None

    def read(self, size: int = -1) -> bytes:
        """Hand out the next block.

        Parameters
        ----------
        size : int
            Ignored: blocks have the size that suits the reader.

        Returns
        -------
        bytes
            Empty at the end of the file.

        Raises
        ------
        DataFault
            If a bound is broken or the file turns out damaged or binary.
        """
        block = self._hand_out()
        self.line += count_bytes(block)
        return block

    def take(self) -> bytes:
        """Hand out the next block without counting its lines, for who counts them anyway.

        Returns
        -------
        bytes
            Empty at the end of the file.

        Raises
        ------
        DataFault
            As from `read`.
        """
        self._is_counted = self._recount is None
        return self.read() if self._is_counted else self._hand_out()

    def _hand_out(self) -> bytes:
        block = self._pending[self._at :] or self._next_block()
        self._pending, self._at = b"", 0
        if block:
            self.tail = block if len(block) >= HEAD else (self.tail + block)[-2 * HEAD :]
        return block

    def readline(self) -> bytes:
        """Hand out one line with its line feed.

        Returns
        -------
        bytes
            Empty at the end of the file.
        """
        parts = []
        while True:
            if self._at >= len(self._pending):
                self._pending, self._at = self._next_block(), 0
            cut = self._pending.find(b"\n", self._at) + 1
            begin, self._at = self._at, cut or len(self._pending)
            parts.append(self._pending[begin : self._at])
            if cut or not self._pending:
                break
        line = b"".join(parts)
        self.line += line.endswith(b"\n")
        return line

    def push_back(self, data: bytes) -> None:
        """Take back the end of what was handed out.

        Parameters
        ----------
        data : bytes
            Will be handed out next.
        """
        self._pending, self._at = data + self._pending[self._at :], 0
        self.line -= count_bytes(data)

    @property
    def expected(self) -> float:
        """Bytes that will have been handed out at the end, as far as the packing tells."""
        return max(self._handed * self._tap.size / max(self._tap.count, 1), 1.0)

    def close(self) -> None:
        """Close the file."""
        self._unpacked.close()
        self._tap.close()

    def __enter__(self) -> ByteStream:
        """Give the stream itself."""
        return self

    def __exit__(self, *_: object) -> None:
        """Close the file."""
        self.close()

    def __iter__(self) -> Iterator[bytes]:
        """Iterate over the lines."""
        return iter(self.readline, b"")

    def _next_block(self) -> bytes:
        if self._ended:
            return b""
        try:
            block = self._load()
        except GmidError as error:
            self.fault = error
            raise
        if not block:
            self._ended = True
            digest = self._tap.finish()
            if digest is not None and self._on_digest is not None:
                self._on_digest(digest)
        return block

    def _load(self) -> bytes:
        """Read, unpack, check and transcode until there is something to hand out."""
        while True:
            try:
                data = self._unpacked.read(BLOCK)
            except (EOFError, OSError, zlib.error) as error:
                raise self._damaged(error) from error
            first = self._total == 0
            self._total += len(data)
            self._check_size()
            block = self._transcode(data, first=first)
            if block:
                self._check_block(block)
                self._handed += len(block)
            if block or not data:
                return block

    def _transcode(self, data: bytes, *, first: bool) -> bytes:
        if self._decoder is not None:
            try:
                text = self._decoder.decode(data, not data)
            except UnicodeDecodeError as error:
                raise DataFault(
                    f"the text is no valid {self._encoding.upper()}: {error.reason}.",
                    where=self._where(b""), hint="The file is damaged or cut off: copy it again.",
                ) from error  # fmt: skip
            data = (text.removeprefix("\ufeff") if first else text).encode()
        elif self._encoding == "latin-1":
            if not data.isascii():
                data = data.decode("latin-1").encode()
        elif first:
            data = data.removeprefix(codecs.BOM_UTF8)
        if data.endswith(_END_MARK) and self._encoding != "binary":
            data = data.rstrip(_END_MARK)
        return data.replace(b"\r", b"\n") if self._carriage else data

    def _check_size(self) -> None:
        limits = self._limits
        if self._total > limits.unpacked:
            raise DataFault(
                f"the text is longer than {limits.unpacked} bytes"
                f"{' when unpacked' if self._packed else ''}.",
                where=self._name, hint="Split the sweep into several files.",
            )  # fmt: skip
        ratio = self._total / max(self._tap.count, 1)
        if self._packed and self._total > _RATIO_FROM and ratio > limits.ratio:
            raise DataFault(
                f"the gzip file unpacks to more than {limits.ratio:g} times its size, "
                "which no sweep does.", where=self._name,
                hint="Unpack it and look at what it holds.",
            )  # fmt: skip

    def _check_block(self, block: bytes) -> None:
        if self._encoding == "binary":
            return
        if b"\0" in block:
            raise DataFault(
                "a NUL byte stands here: the file is damaged or binary.",
                where=self._where(block[: block.index(b"\0")]), hint="Write or copy it again.",
            )  # fmt: skip
        long = self._find_long_line(block)
        if long is not None:
            raise DataFault(
                f"the line is longer than {self._limits.line} bytes.",
                where=self._where(block[:long]),
                hint="This is no table of rows; check what the file holds.",
            )
        last = block.rfind(b"\n")
        self._run = len(block) - last - 1 + (self._run if last < 0 else 0)

    def _where(self, before: bytes) -> str:
        """Place of the line in a block that stands behind these of its bytes."""
        known = self._is_counted or self._recount is None
        lines = self.line if known else self._recount(self._handed)  # type: ignore[misc]
        return f"{self._name}:{lines + count_bytes(before) + 1}"

    def _find_long_line(self, block: bytes) -> int | None:
        """Find where in a block a line is too long, if one is."""
        limit = self._limits.line
        cut = block.find(b"\n")
        if self._run + (cut if cut >= 0 else len(block)) > limit:
            return 0
        half = max(limit // 2, 1)
        windows = range(0, len(block) - half, half)
        if all(block.find(b"\n", start, start + half) >= 0 for start in windows):
            return None
        ends = find_bytes(block)
        gaps = np.diff(ends, append=len(block))
        return int(ends[gaps.argmax()]) + 1 if ends.size and gaps.max() > limit + 1 else None

    def _damaged(self, error: Exception) -> DataFault:
        what = "the gzip file is damaged or cut off" if self._packed else "the file cannot be read"
        return DataFault(
            f"{what}: {str(error).rstrip('.').lower()}.", where=self._name, hint="Copy it again."
        )
