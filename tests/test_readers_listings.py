"""Operating-point listings read many records at a time are those read line by line."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.errors import GmidError
from gmid.sweep.readers import operating_point
from gmid.sweep.source import open_bytes

COUNT = 300
NUMBERS = np.random.default_rng(7).normal(size=(COUNT, 3)) * 1e-6


def equations(row, _):
    return f"vgs = {row[0]:.9e}\n@m1[gm] = {row[1]:.6e}\n@m1[gds]={row[2]:g} S\n\n"


def pairs(row, _):
    return f"   vgs   {row[0]: .9e}\n   gm    {row[1]: .6e}\n   gds\t{row[2]:g}\n"


def side_by_side(row, index):
    return (
        f"--- bias {index} ---\n device  m1  m2\n gm {row[0]:g} {row[1]:g}\n"
        f" gds  {row[2]:g}  {index}u\n"
    )


def suffixed(row, index):
    return f"point of {index} : x\n vgs = {index}m V\n gm = {row[1] * 1e6:.4f}u\n"


def dashed(row, _):
    return f"=======\n vgs = {row[0]:g}\n gm = {row[1]:g}\n -------\n gds = {row[2]:g}\n"


FORMS = {form.__name__: form for form in (equations, pairs, side_by_side, suffixed, dashed)}


def outcome(data, record=None):
    """Everything a reading tells."""
    try:
        (table,) = operating_point.read(open_bytes(data, name="op.txt"), record=record)
    except GmidError as fault:
        return str(fault)
    values = [column.values.tobytes() for column in table.columns]
    return table.names, values, table.lines.tolist(), table.meta


def one_by_one(monkeypatch, data, record=None):
    with monkeypatch.context() as patch:
        patch.setattr(operating_point._Listing, "skip", lambda *_: 0)
        return outcome(data, record)


def write(form, end="\n"):
    text = "listing of one run\n" + "".join(form(row, i) for i, row in enumerate(NUMBERS))
    return text.replace("\n", end).encode()


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize("record", [None, "bias|point|vgs|===="])
def test_the_same_at_once_and_one_by_one(monkeypatch, form, record):
    data = write(FORMS[form])
    taken = []
    skip = operating_point._Listing.skip

    def counted(self, *words):
        taken.append(skip(self, *words))
        return taken[-1]

    slow = one_by_one(monkeypatch, data, record)
    monkeypatch.setattr(operating_point._Listing, "skip", counted)
    assert outcome(data, record) == slow
    assert isinstance(slow, tuple)
    assert len(slow[2]) == COUNT
    assert sum(taken) > 0.8 * data.count(b"\n")


def test_values_and_lines_are_those_written(monkeypatch):
    names, values, lines, meta = outcome(write(equations))
    assert names == ["vgs", "@m1[gm]", "@m1[gds]"]
    assert np.frombuffer(values[0]) == pytest.approx(NUMBERS[:, 0], rel=1e-9)
    assert lines == [2 + 4 * i for i in range(COUNT)]
    assert meta == {"title": "listing of one run"}
    assert outcome(write(equations, "\r\n"))[2] == lines


@pytest.mark.parametrize("form", FORMS)
def test_a_damaged_listing_tells_the_same(monkeypatch, form):
    lines = write(FORMS[form]).split(b"\n")
    chance = np.random.default_rng(3)
    spoilt = [b"", b"gm = 1_0", b" gm nan", b"@m1[gm] = ", b"new words", b"xyz = 4", b" device a",
              b"------", b"gm = failed", b" gm 1 2 3", b"gds = 1e-3 A", b"\xb5 = 3"]  # fmt: skip
    seen = set()
    for _ in range(60):
        copy = list(lines)
        where = int(chance.integers(20, len(lines)))
        kind = int(chance.integers(4))
        if kind == 0:
            del copy[where]
        elif kind == 1:
            copy[where] = spoilt[int(chance.integers(len(spoilt)))]
        elif kind == 2:
            copy.insert(where, spoilt[int(chance.integers(len(spoilt)))])
        else:
            copy[where] = copy[where][: int(chance.integers(1 + len(copy[where])))]
        data = b"\n".join(copy)
        told = outcome(data)
        assert told == one_by_one(monkeypatch, data)
        seen.add(type(told))
    assert str in seen


def test_values_without_their_devices_are_not_dropped():
    lines = write(side_by_side).split(b"\n")
    lines[278] = b""
    assert "op.txt:280: expected 0 value(s) for 'gm', as there are devices above, found 2." in (
        outcome(b"\n".join(lines))
    )
