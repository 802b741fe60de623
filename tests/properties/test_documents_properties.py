"""Requests, plans and sheets: what is written is read back; whatever is read ends in words."""

from __future__ import annotations

import json
import math
import random
import tempfile
from pathlib import Path

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from gmid.amplifier.places import INPUTS, OUTPUTS, SENSES, Variant, list_places
from gmid.amplifier.plan import AmplifierPlan, Requirement, TransistorPlan
from gmid.condition import Condition
from gmid.errors import DataFault, GmidError
from gmid.request import open_bench, read_request
from gmid.request.plans import read_plan, write_plan
from gmid.request.reading import parse_request
from gmid.request.request import EXAMPLE
from gmid.request.requirements import DEMANDS
from gmid.sheet.data import (
    AmplifierSheet,
    CheckRow,
    FilterSheet,
    NoisePoint,
    Sheet,
    to_plain,
)

ROOT = Path(__file__).resolve().parents[2]
REQUEST = parse_request(EXAMPLE)
TEXTS = [
    file.read_text(encoding="utf-8")
    for file in (
        *sorted((ROOT / "tests" / "requests").glob("*.toml")), ROOT / "demo" / "flow_meter.toml",
    )
    if not file.stem.startswith("expected")
]  # fmt: skip
PLAN_TEXT = (ROOT / "demo" / "channel_amplifier_plan.toml").read_text(encoding="utf-8")

positive = st.floats(1e-18, 1e12, allow_subnormal=False)
words = st.text(st.characters(blacklist_categories=("Cs", "Cc")), max_size=20)
counts = st.integers(1, 500)


@st.composite
def plans(draw) -> AmplifierPlan:
    variant = Variant(*(draw(st.sampled_from(kind)) for kind in (INPUTS, OUTPUTS, SENSES)))
    transistors = {
        place: TransistorPlan(
            draw(st.sampled_from(["nmos", "pmos"])), draw(st.floats(1e-9, 1e-3)), draw(counts),
            draw(st.integers(1, 9)), draw(st.sampled_from(["rail", "source"])),
        )
        for place in list_places(variant)
    }  # fmt: skip
    demands = {
        name: Requirement(
            draw(positive), draw(positive) if name == "input_noise" else None,
            draw(st.sampled_from(["asked for", 'it says "so"', "section 2\nand more"])),
        )
        for name in draw(st.sets(st.sampled_from(sorted(DEMANDS))))
    }  # fmt: skip
    elements = {
        name: draw(positive)
        for name in ("sense_resistance", "sense_capacitance", "error_resistance",
                     "error_capacitance", "load_capacitance")
    }  # fmt: skip
    try:
        return AmplifierPlan(
            draw(st.from_regex(r"[a-z][a-z0-9_]{0,8}", fullmatch=True)), transistors, **elements,
            load_resistance=draw(st.one_of(positive, st.just(math.inf))),
            output_capacitance=draw(st.one_of(positive, st.just(0.0))),
            input_pair=variant.input_pair, output=variant.output,
            common_mode_sense=variant.common_mode_sense,
            positions=tuple(draw(st.lists(st.sampled_from(["A1", "A2", "A3"]), unique=True))),
            multiple=draw(st.integers(1, 64)), demands=demands,
        )  # fmt: skip
    except DataFault:  # counts that leave `control` no current
        assume(False)
        raise


def spread(plan: AmplifierPlan) -> dict[str, object]:
    """All that a plan holds, as values that can be compared."""
    parts = {place: vars(one) for place, one in plan.transistors.items()}
    return {**vars(plan), "transistors": parts}


@settings(max_examples=60)
@given(st.lists(plans(), min_size=1, max_size=2, unique_by=lambda plan: plan.name))
def test_a_plan_reads_back_to_the_last_digit(written):
    with tempfile.TemporaryDirectory() as folder:
        file = Path(folder) / "plan.toml"
        file.write_text(write_plan(REQUEST, written, folder), encoding="utf-8")
        found = read_plan(file)
    for plan, back in zip(written, found.plans, strict=True):
        assert spread(back) == spread(plan)
    assert found.request.supply == REQUEST.supply


checks = st.builds(
    CheckRow, name=words, required=st.floats(), achieved=st.floats(), unit=words, condition=words,
    margin=st.floats(), met=st.booleans(),
)  # fmt: skip
sheets = st.builds(
    Sheet, title=words, supply=words,
    amplifiers=st.lists(st.from_type(AmplifierSheet), max_size=1).map(tuple),
    cautions=st.lists(words, max_size=3).map(tuple), sentence=words,
    provenance=st.lists(st.tuples(words, words), max_size=2).map(tuple),
    filter=st.none() | st.builds(
        FilterSheet, description=words, sections=st.just(()), elements=st.just(()),
        response=st.just(()), checks=st.lists(checks, max_size=3).map(tuple),
        total_capacitance=st.floats(),
    ),
)  # fmt: skip


@settings(max_examples=60)
@given(sheets)
def test_a_sheet_goes_through_json_unchanged(sheet):
    data = sheet.to_json()
    assert json.loads(json.dumps(data, allow_nan=False)) == data
    assert data["title"] == sheet.title
    assert data["verdict"] == sheet.verdict
    if sheet.filter:
        for row, plain in zip(sheet.filter.checks, data["filter"]["checks"], strict=True):
            for name in ("required", "achieved", "margin"):
                value = getattr(row, name)
                assert plain[name] == (value if math.isfinite(value) else None)
    margins = [check.margin for _, check in sheet.checks]
    assert margins == sorted(margins) or any(map(math.isnan, margins))


@given(st.recursive(
    st.none() | st.booleans() | st.floats() | st.integers() | words
    | st.builds(NoisePoint, frequency=st.floats(), density=st.floats()),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(words, inner, max_size=3),
    max_leaves=12,
))  # fmt: skip
def test_plain_data_is_what_json_knows(value):
    plain = to_plain(value)
    assert json.loads(json.dumps(plain, allow_nan=False)) == plain
    assert to_plain(plain) == plain


CONDITIONS = ("tt/27", "ss/-40", "ss/125", "ff/-40", "ff/125", "sf/27", "fs/27")


@settings(max_examples=15)
@given(st.permutations(CONDITIONS), st.integers(1, len(CONDITIONS)))
def test_conditions_keep_the_order_of_the_request(order, number):
    asked = order[:number]
    text = EXAMPLE.replace('table = "larch180.h5"', f"table = 'larch180.h5'\nconditions = {asked}")
    request = parse_request(text, path=ROOT / "tables" / "request.toml")
    bench = open_bench(request.process)
    assert [str(condition) for condition in bench.conditions] == asked
    assert [condition for condition, _ in bench] == list(bench.conditions)


@given(st.from_regex(r"[A-Za-z][A-Za-z0-9_]{0,8}", fullmatch=True), st.floats(-270, 990))
def test_a_condition_reads_back(corner, temperature):
    condition = Condition(corner, float(f"{temperature:.4g}"))
    assert Condition.parse(str(condition)) == condition


HOSTILE = (
    "-1", "0", "nan", "inf", "1e400", "-1e400", "true", "[]", "[[1]]", "{}", '{ a = 1 }', '""',
    '"nan V"', '"inf Hz"', '"1e999 V"', '"-3 dB"', '"1 parsec"', '"0 V"', '"\\u0000"', "'''x'''",
    "1979-05-27", "07:32:00", '"' + "9" * 400 + ' Hz"', '["1 kHz"]', '["2 kHz", "1 kHz"]', '"auto"',
    '"none"', "[1, 2, 3]", '"1 V" ', "0x7fffffffffffffff", '"../../x"', '"tt/27"', '"1e-300 F"',
    '"1e300 ohm"', "10000000000000000000000", '"100000 %"',
)  # fmt: skip
"""Values that do not belong where they are put."""


def spoil(text: str, dice: random.Random) -> str:
    """Damage a document: values, lines, letters."""
    lines = text.splitlines()
    for _ in range(dice.choice((1, 1, 1, 2, 5))):
        place = dice.randrange(len(lines))
        what = dice.randrange(8)
        key, equals, _ = lines[place].partition("=")
        if what < 4 and equals:
            lines[place] = f"{key}= {dice.choice(HOSTILE)}"
        elif what == 4:
            del lines[place]
        elif what == 5:
            lines.insert(place, dice.choice(lines))
        elif what == 6 and lines[place]:
            letter = dice.randrange(len(lines[place]))
            new = dice.choice('"=[]{}#.\n\t\\\0\x7f\u00b5\ufeff' + "x0-")
            lines[place] = lines[place][:letter] + new + lines[place][letter + 1 :]
        elif equals:
            lines[place] = f"{key.strip()[::-1]} ={lines[place].partition('=')[2]}"
        lines = lines or [""]
    return "\n".join(lines) + "\n"


@pytest.mark.parametrize(
    ("texts", "read", "number"),
    [(TEXTS, read_request, 1200), ([PLAN_TEXT], read_plan, 500)],
    ids=["requests", "plans"],
)
def test_broken_documents_end_in_words(tmp_path, texts, read, number):
    file = tmp_path / "fuzzed.toml"
    dice = random.Random(20261201)
    refused = 0
    for _ in range(number):
        text = spoil(dice.choice(texts), dice)
        file.write_text(text, encoding="utf-8")
        try:
            read(file)
        except GmidError as fault:
            refused += 1
            told = str(fault)
            assert told.strip()
            assert "Traceback" not in told
            assert "pydantic" not in told
        except Exception as error:
            raise AssertionError(f"{type(error).__name__}: {error}\n{text}") from error
    assert number // 3 < refused < number


@pytest.mark.parametrize("read", [read_request, read_plan])
@settings(max_examples=80)
@given(raw=st.binary(max_size=200))
def test_no_bytes_come_through_otherwise(read, raw):
    with tempfile.TemporaryDirectory() as folder:
        file = Path(folder) / "f.toml"
        file.write_bytes(raw)
        with pytest.raises(GmidError):
            read(file)
