"""``gmid check``, ``netlist`` and ``simulate`` on a plan of the demo process."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from gmid.amplifier.drafting import Draft, draft_plan
from gmid.amplifier.places import Variant
from gmid.amplifier.plan import Requirement
from gmid.request import open_bench, write_plan
from gmid.request.reading import parse_request

ROOT = Path(__file__).resolve().parents[2]

REQUEST = f"""\
format = 1
title = "Receive channel, one integrator"
[process]
table = "{(ROOT / "tables" / "larch180.h5").as_posix()}"
conditions = ["tt/27", "ss/125"]
[process.devices]
n = "nmos"
p = "pmos"
[supply]
voltage = "1.8 V"
tolerance = "10 %"
reference_current = "2 uA"
[demands]
gbw = "10 MHz"
load_capacitance = "1 pF"
"""


@pytest.fixture(scope="module")
def base():
    """The request, and a drafted plan without demands."""
    request = parse_request(REQUEST)
    _, devices = next(iter(open_bench(request.process)))
    wanted = Draft({"n": "nmos", "p": "pmos"}, Variant(), 8e-6, 1e-12)
    return request, replace(draft_plan(wanted, devices, request.supply), name="a1")


@pytest.fixture
def plan_file(base, tmp_path):
    """Write a plan with given demands."""

    def write(**demands: float) -> Path:
        request, plan = base
        wanted = {name: Requirement(value) for name, value in demands.items()}
        file = tmp_path / "plan.toml"
        file.write_text(write_plan(request, [replace(plan, demands=wanted)], tmp_path))
        return file

    return write


def test_check_reports_without_demands(gmid, plan_file):
    run = gmid("check", plan_file())
    assert run.code == 0, run.err
    assert "Receive channel, one integrator" in run.out
    assert "First to leave saturation" in run.out
    for place in ("pair", "direct", "control", "error_tail", "bias_load"):
        assert f"\n{place} " in run.out


def test_a_missed_demand_ends_with_3_and_its_line(gmid, plan_file):
    run = gmid("check", plan_file(dc_gain=30.0, gbw=1e9))
    assert run.code == 3
    assert run.out.splitlines()[3].startswith("MISSED: ")
    (line,) = [line for line in run.out.splitlines() if line.startswith("GBW ")]
    assert "1 GHz" in line
    assert "MISSED" in line


def test_the_sheet_as_json_has_the_documented_fields(gmid, plan_file):
    sheet = gmid("check", plan_file(gbw=1e6), "--json").json
    assert sheet["format"] == 1
    assert sheet["verdict"] in ("met", "missed")
    (one,) = sheet["amplifiers"]
    assert one["demands"]["gbw"] == {
        "value": 1e6, "unit": "Hz", "because": "asked for", "at": None,
    }  # fmt: skip
    assert len(one["conditions"]) == 6
    wanted = {
        "corner", "temperature", "supply", "dc_gain_db", "gbw", "phase_margin", "gm_total",
        "input_noise", "supply_current", "power", "slew_rate", "output_swing", "node_voltages",
        "common_mode",
    }  # fmt: skip
    assert wanted <= set(one["conditions"][0])
    loop = {"dc_gain_db", "gbw", "phase_margin", "input_to_output_gain_db", "settled_error"}
    assert loop <= set(one["conditions"][0]["common_mode"])
    rows = {row["name"]: row for row in one["transistors"]}
    wanted = {
        "name", "role", "device", "length", "unit_width", "count", "stack", "id", "gm_over_id",
        "vgs", "vds", "vsb", "vdsat", "headroom", "worst_headroom",
    }  # fmt: skip
    assert wanted <= set(rows["pair_p"])
    assert {"name", "required", "achieved", "unit", "condition", "margin", "met"} <= set(
        one["checks"][0]
    )


def test_checks_as_csv(gmid, plan_file):
    lines = gmid("check", plan_file(gbw=1e6), "--csv").out.splitlines()
    assert lines[0].startswith("of,name,required,achieved,unit,condition,margin,met")
    assert any(line.startswith("a1,gbw,1000000.0,") for line in lines)


def test_a_plan_whose_control_gets_no_current_is_named(gmid, plan_file):
    file = plan_file()
    text = file.read_text()
    line = next(line for line in text.splitlines() if line.startswith("opposite ="))
    count = int(line.split("count = ")[1].split(" ")[0])
    file.write_text(text.replace(line, line.replace(f"count = {count}", f"count = {3 * count}")))
    run = gmid("check", file)
    assert run.code in (0, 1)
    assert "control" in run.out + run.err


def test_netlist_writes_all_files_or_none(gmid, plan_file, tmp_path):
    out = tmp_path / "netlists"
    run = gmid("netlist", plan_file(), "-o", out)
    assert run.code == 0, run.err
    names = {"open_loop", "common_mode", "noise", "step", "startup"}
    assert {file.name for file in out.iterdir()} == {
        "amplifier.cir", *(f"bench_{name}.cir" for name in names),
    }  # fmt: skip
    for file in out.glob("bench_*.cir"):
        lines = file.read_text().splitlines()
        assert sum(line.startswith((".ac", ".noise", ".tran", ".op", ".dc")) for line in lines) == 1
        assert not any(line.startswith(".options") for line in lines)
        assert lines.index(".include models.inc") < lines.index(".include amplifier.cir")
    before = (out / "amplifier.cir").read_bytes()
    again = gmid("netlist", plan_file(gbw=1e6), "-o", out)
    assert again.code == 1
    assert "--force" in again.err
    assert (out / "amplifier.cir").read_bytes() == before


def test_simulate_sets_sheet_and_simulation_side_by_side(gmid, plan_file):
    models = ROOT / "demo" / "larch180" / "models" / "tt.inc"
    run = gmid("simulate", plan_file(), "--models", f"tt/27={models}", "--quick", "--json")
    assert run.code == 0, run.err
    rows = {row["figure"]: row for row in run.json["rows"]}
    assert abs(rows["dc_gain_db"]["difference"]) < 0.1
    assert abs(rows["gbw"]["difference"] / rows["gbw"]["sheet"]) < 3e-3
    assert abs(rows["node tail"]["difference"]) < 0.5e-3


@pytest.mark.parametrize(
    ("word", "code", "words"),
    [
        ("tt", 2, "CONDITION=FILE"),
        ("ff/0=x.inc", 1, "cannot be read"),
        (f"sf/27={ROOT / 'demo/larch180/models/sf.inc'}", 2, "no condition sf/27"),
    ],
)
def test_faults_of_simulate(gmid, plan_file, word, code, words):
    run = gmid("simulate", plan_file(), "--models", word)
    assert run.code == code
    assert words in run.err
    assert run.out == ""
