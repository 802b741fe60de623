"""A plan whose amplifiers stand in a filter: checked and simulated as a whole."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from gmid.amplifier.drafting import Draft, draft_plan
from gmid.amplifier.places import Variant
from gmid.request import open_bench, write_plan
from gmid.request.reading import parse_request

ROOT = Path(__file__).resolve().parents[2]

REQUEST = f"""\
format = 1
title = "Receive channel, low-pass of second order"
[process]
table = "{(ROOT / "tables" / "larch180.h5").as_posix()}"
conditions = ["tt/27"]
[process.devices]
n = "nmos"
p = "pmos"
[supply]
voltage = "1.8 V"
reference_current = "2 uA"
[filter]
response = "butterworth"
order = 2
edge = "150 kHz"
capacitor = "4 pF"
swing = "0.2 V"
[tolerance]
passband = "1 dB"
counts = "tuned-shape"
"""


@pytest.fixture(scope="module")
def plan_file(tmp_path_factory):
    """One drafted amplifier at both positions."""
    folder = tmp_path_factory.mktemp("plan")
    request = parse_request(REQUEST)
    _, devices = next(iter(open_bench(request.process)))
    wanted = Draft({"n": "nmos", "p": "pmos"}, Variant(), 20e-6, 1e-12)
    plan = replace(
        draft_plan(wanted, devices, request.supply), positions=("A1", "A2"),
        output_capacitance=1e-12,
    )  # fmt: skip
    file = folder / "plan.toml"
    file.write_text(write_plan(request, [plan], folder), encoding="utf-8")
    return file


def test_the_filter_is_judged_with_its_amplifiers(gmid, plan_file):
    sheet = gmid("check", plan_file, "--json").json
    names = {check["name"] for check in sheet["filter"]["checks"]}
    assert {"passband", "damping"} <= names
    (passband,) = [one for one in sheet["filter"]["checks"] if one["name"] == "passband"]
    assert 0.0 < passband["achieved"] < 1.0
    conditions = {row["condition"] for row in sheet["filter"]["response"]}
    assert conditions == {"tt/27/1.8"}
    assert {row["tuned"] for row in sheet["filter"]["response"]} == {True, False}


def test_the_filter_is_simulated_with_its_amplifiers(gmid, plan_file):
    models = ROOT / "demo" / "larch180" / "models" / "tt.inc"
    run = gmid("simulate", plan_file, "--models", f"tt/27={models}", "--quick", "--json")
    assert run.code == 0, run.err
    rows = [row for row in run.json["rows"] if row["amplifier"] == "filter"]
    assert len(rows) == 5
    assert max(abs(row["difference"]) for row in rows) < 0.05


def test_netlists_hold_the_whole_filter(gmid, plan_file, tmp_path):
    out = tmp_path / "netlists"
    assert gmid("netlist", plan_file, "-o", out).code == 0
    text = (out / "filter.cir").read_text()
    assert text.count(" a1\n") == 2
    assert ".param rscale=1" in text
