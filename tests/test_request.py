"""Requests and plans: what a file says is what flows, and every fault is told with its line."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path

import pytest

from gmid.amplifier.example import example_plan
from gmid.amplifier.plan import Requirement
from gmid.condition import Condition
from gmid.errors import DataFault, Faults, GmidError, UnknownName
from gmid.request import open_bench, read_plan, read_request, write_plan
from gmid.request.reading import parse_request
from gmid.request.requirements import DEMANDS, read_demand, spell, spell_demand

TABLE = Path(__file__).resolve().parents[1] / "tables" / "larch180.h5"

BASE = """\
format = 1
title = "Receive channel"
[process]
table = "larch180.h5"
conditions = ["tt/27", "ss/-40"]
own_well = ["pmos"]
[process.devices]
n = "nmos"
p = "pmos"
[supply]
voltage = "1.8 V"
tolerance = "10 %"
common_mode = "0.85 V"
reference_current = "2 uA"
"""
DEMANDED = (
    BASE
    + """
[demands]
dc_gain = "60 dB"
gbw = "20 MHz"
load_capacitance = "1 pF"
input_noise = { density = "40 nV/rtHz", at = "1 MHz" }
"""
)
FILTERED = (
    BASE
    + """
[filter]
response = "chebyshev"
order = 5
edge = "400 kHz"
ripple = "0.5 dB"
swing = "0.6 V"
[tolerance]
passband = "0.2 dB"
counts = "tuned-shape"
[passives]
capacitor_density = "1 fF/um2"
bottom_plate = "5 %"
[amplifier]
lengths = ["0.3 um", "0.6 um"]
smallest_length = { pair = "0.3 um" }
[matching]
nmos = { avt = "3.5 mV um", abeta = "1 % um" }
"""
)


def test_demands_and_supply_are_read():
    request = parse_request(DEMANDED)
    assert request.title == "Receive channel"
    assert request.process.conditions == (Condition("tt", 27.0), Condition("ss", -40.0))
    assert request.process.own_well == ("pmos",)
    assert request.supply.voltages == pytest.approx([1.62, 1.8, 1.98])
    assert float(request.supply.common_mode.at(1.62)) == 0.85
    assert request.demands["dc_gain"] == Requirement(60.0)
    assert request.demands["input_noise"] == Requirement(40e-9, at=1e6)
    assert request.load_capacitance == 1e-12
    assert request.spec is None


def test_a_filter_is_read():
    request = parse_request(FILTERED)
    assert request.spec is not None
    assert request.tolerance is not None
    assert (request.spec.order, request.spec.edge, request.spec.ripple_db) == (5, 4e5, 0.5)
    assert request.tolerance.counts == "tuned-shape"
    assert request.passives.capacitor_density == pytest.approx(1e-3)
    assert request.choices.lengths == (0.3e-6, 0.6e-6)
    assert request.choices.smallest_length == {"pair": 0.3e-6}
    assert request.matching["nmos"].avt == pytest.approx(3.5e-9)
    assert request.matching["nmos"].abeta == pytest.approx(1e-8)


@pytest.mark.parametrize(
    ("change", "line", "words"),
    [
        (('voltage = "1.8 V"', 'voltge = "1.8 V"'), 11, "Did you mean voltage"),
        (('voltage = "1.8 V"', 'voltage = "1.8 A"'), 11, "supply.voltage"),
        (('voltage = "1.8 V"', 'voltage = "-1 V"'), 11, "above 0 V"),
        (('"tt/27"', '"tt"'), 5, "conditions"),
        (('common_mode = "0.85 V"', 'common_mode = "150 %"'), 13, "common_mode"),
        (("[demands]", "[demnds]"), 16, "demands"),
        (('dc_gain = "60 dB"', 'dc_gain = "60 Hz"'), 17, "dc_gain"),
        (('at = "1 MHz"', 'att = "1 MHz"'), 20, "at"),
        (('gbw = "20 MHz"', 'gbw = "0 MHz"'), 18, "positive"),
        (('load_capacitance = "1 pF"\n', ""), 16, "lacks load_capacitance"),
    ],
)
def test_faults_of_a_request(change, line, words):
    assert change[0] in DEMANDED
    with pytest.raises(GmidError) as trouble:
        parse_request(DEMANDED.replace(*change), name="a.toml")
    text = str(trouble.value)
    assert f"a.toml:{line}: " in text
    assert words in text


@pytest.mark.parametrize(
    ("change", "line", "words"),
    [
        (('edge = "400 kHz"', 'edge = ["400 kHz", "500 kHz"]'), 19, "edge"),
        (('edge = "400 kHz"\n', ""), 16, "edge"),
        (('"chebyshev"', '"chebychev"'), 17, "chebyshev"),
        (('ripple = "0.5 dB"', 'ripple = "-1 dB"'), 20, "ripple"),
        (('passband = "0.2 dB"', 'passband = "0 dB"'), 23, "passband"),
        (('"5 %"', '"-5 %"'), 27, "bottom_plate"),
        (("{ pair =", "{ pear ="), 30, "pair"),
        (("nmos = { avt", "nmoss = { avt"), 32, "nmos"),
    ],
)
def test_faults_of_a_filter(change, line, words):
    assert change[0] in FILTERED
    with pytest.raises(GmidError) as trouble:
        parse_request(FILTERED.replace(*change), name="a.toml")
    assert f"a.toml:{line}: " in str(trouble.value)
    assert words in str(trouble.value)


def test_every_fault_is_told_at_once():
    text = DEMANDED.replace('"1.8 V"', '"x"').replace("gbw", "gbv").replace('"60 dB"', '"60"')
    with pytest.raises(Faults) as trouble:
        parse_request(text, name="a.toml")
    assert len(trouble.value.faults) >= 2


def test_a_request_has_one_goal():
    with pytest.raises(DataFault, match="neither"):
        parse_request(BASE)
    with pytest.raises(DataFault, match="both"):
        parse_request(FILTERED + '[demands]\ngbw = "1 MHz"\nload_capacitance = "1 pF"\n')
    with pytest.raises(DataFault, match="tolerance"):
        parse_request(re.sub(r"\[tolerance\]\n.*\n.*\n", "", FILTERED))


@pytest.mark.parametrize("name", DEMANDS)
def test_a_demand_reads_back_as_it_was(name):
    at = 1e6 if name == "input_noise" else None
    demand = Requirement(1.0 / 3.0 * 1e-6, at=at, because="its own test")
    assert read_demand(name, spell_demand(name, demand)) == demand


@pytest.mark.parametrize("value", [1 / 3, 1e-15, 123456.789, 2e-6, 0.1 + 0.2])
def test_numbers_read_back_to_the_last_digit(value):
    assert read_demand("gbw", spell(value, "Hz")).value == value


@pytest.fixture
def plan_file(tmp_path):
    """A request file with its table beside it, and a plan of the example's places."""
    request_file = tmp_path / "request.toml"
    request_file.write_text(DEMANDED, encoding="utf-8")
    (tmp_path / "larch180.h5").symlink_to(TABLE)
    request = read_request(request_file)
    plan = replace(
        example_plan().with_place("load", stack=2, bulk="source"),
        demands={"gbw": Requirement(20e6, because="section 2")},
        positions=("A1", "A2"),
    )
    out = tmp_path / "out"
    out.mkdir()
    digest = open_bench(request.process).table.digest
    file = out / "plan.toml"
    file.write_text(write_plan(request, [plan], out, digest=digest), encoding="utf-8")
    return file, plan


def test_a_plan_reads_back_as_it_was(plan_file):
    file, plan = plan_file
    found = read_plan(file)
    (back,) = found.plans
    assert repr(back.transistors) == repr(plan.transistors)
    assert back.demands == plan.demands
    assert (back.load_capacitance, back.error_capacitance) == (2e-12, 2e-12)
    assert found.request.process.table.resolve() == TABLE.resolve()
    bench = open_bench(found.request.process)
    assert [str(condition) for condition in bench.conditions] == ["tt/27", "ss/-40"]
    assert set(bench.devices(Condition("ss", -40.0))) == {"nmos", "pmos"}


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("count = 5", "count = 5.5"), "transistors.direct.count"),
        (("count = 5", "count = 0"), "from 1 up"),
        (("direct =", "dirct ="), "direct"),
        (('"500 nm"', '"0 nm"'), "length"),
        (('pair = { device = "nmos"', 'pair = { device = "nmoss"'), "nmos"),
        (('output = "plain"', 'output = "cascoded"'), "lacks"),
        (('bulk = "source"', 'bulk = "drain"'), "bulk"),
        (("multiple = 1", "multiple = 0"), "multiple"),
    ],
)
def test_faults_of_a_plan(plan_file, change, words):
    file, _ = plan_file
    text = file.read_text(encoding="utf-8")
    assert change[0] in text
    file.write_text(text.replace(change[0], change[1], 1), encoding="utf-8")
    with pytest.raises(GmidError) as trouble:
        read_plan(file)
    assert re.search(r"plan\.toml:\d+: ", str(trouble.value))
    assert words in str(trouble.value)


def test_a_changed_table_is_noticed(plan_file):
    file, _ = plan_file
    text = re.sub(r'digest = "\w+"', 'digest = "0123456789abcdef"', file.read_text())
    file.write_text(text, encoding="utf-8")
    with pytest.raises(DataFault, match="has changed since the plan was made") as trouble:
        open_bench(read_plan(file).request.process)
    assert "plan.toml:" in str(trouble.value)


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        (('n = "nmos"', 'n = "nmso"'), UnknownName, "nmos"),
        (('n = "nmos"', 'n = "pmos"'), DataFault, "p-channel"),
        (('"ss/-40"', '"ss/-20"'), UnknownName, "ss/-40"),
    ],
)
def test_faults_that_only_the_table_shows(tmp_path, change, error, words):
    (tmp_path / "larch180.h5").symlink_to(TABLE)
    file = tmp_path / "request.toml"
    file.write_text(DEMANDED.replace(*change), encoding="utf-8")
    with pytest.raises(error, match=words) as trouble:
        open_bench(read_request(file).process)
    assert "request.toml:" in str(trouble.value)
