"""Values of binary SPICE3 raw plots: little-endian 8-byte floats, point by point."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from gmid.errors import DataFault
from gmid.sweep.bytestream import ByteStream
from gmid.sweep.readers.raw_header import Plot
from gmid.sweep.readers.raw_tokens import Body
from gmid.sweep.source import TextSource


def read_binary(source: TextSource, stream: ByteStream, plot: Plot) -> Body:
    r"""Read the values that follow a header.

    Parameters
    ----------
    source : TextSource
        For messages.
    stream : ByteStream
        Directly behind ``Binary:``; left directly before the next plot.
    plot : Plot
        The header; its number of points found is set.

    Returns
    -------
    Body
        The values; numbers of points, from 0, stand in place of lines.

    Raises
    ------
    DataFault
        If values are missing, not finite, or written in another form.

    Examples
    --------
    >>> import struct
    >>> from gmid.sweep.readers.raw_header import read_header
    >>> from gmid.sweep.source import open_bytes
    >>> head = (b"Title: t\nPlotname: dc\nFlags: real\nNo. Variables: 1\nNo. Points: 2\n"
    ...         b"Variables:\n\t0\tv(d)\tvoltage\nBinary:\n")
    >>> source = open_bytes(head + struct.pack("<2d", 0.5, 0.6), name="a.raw")
    >>> with source.stream() as stream:
    ...     body = read_binary(source, stream, read_header(source, stream, 1))
    >>> body.columns
    [array([0.5, 0.6])]
    """
    if plot.is_unpadded:
        raise DataFault(
            "an unpadded binary plot cannot be told apart into points.", where=source.name,
            hint="Write it as text, or padded.",
        )  # fmt: skip
    count, width = len(plot.variables), 16 if plot.is_complex else 8
    wanted = (plot.announced or 0) * count * width
    data = _take(stream, wanted) if wanted else _take_rest(stream)
    points = len(data) // (count * width)
    if not points or len(data) % (count * width) or (wanted and len(data) < wanted):
        announced = f"{plot.announced} points" if wanted else "whole points"
        raise DataFault(
            f"plot {plot.number} should have {announced} of {count} values of {width} bytes, "
            f"found {len(data)} bytes.", where=source.name,
            hint="The file is cut off, or its values are not 8-byte floats: write it as text.",
        )  # fmt: skip
    kind = "<c16" if plot.is_complex else "<f8"
    values: NDArray[Any] = np.frombuffer(data, dtype=kind).reshape(points, count)
    bad = np.argwhere(~np.isfinite(values))
    if bad.size:
        row, column = (int(k) for k in bad[0])
        raise DataFault(
            f"the value of {plot.variables[column].name!r} is not finite at point {row}.",
            where=source.name, hint="Simulate this point again.",
        )  # fmt: skip
    plot.found_points = points
    columns = [np.ascontiguousarray(values[:, j]) for j in range(count)]
    return Body(columns, np.arange(points, dtype=np.int64))


def _take(stream: ByteStream, size: int) -> bytes:
    """Read so many bytes, fewer at the end of the file."""
    parts: list[bytes] = []
    left = size
    while left and (block := stream.read()):
        parts.append(block[:left])
        if len(block) > left:
            stream.push_back(block[left:])
        left -= len(parts[-1])
    return b"".join(parts)


def _take_rest(stream: ByteStream) -> bytes:
    parts = []
    while block := stream.read():
        parts.append(block)
    return b"".join(parts)
