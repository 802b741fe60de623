"""The exported netlists: what may stand in them, and that it is the plan."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from gmid.amplifier import Level, Requirement, Variant, list_places, write_netlists
from gmid.amplifier.drafting import Draft, draft_plan
from gmid.amplifier.example import example_devices, example_plan, example_supply
from gmid.amplifier.topology import PORTS
from gmid.errors import DataFault, Faults

FORMS = [
    Variant(i, o, s)
    for i in "np"
    for o in ("plain", "cascoded")
    for s in ("resistors", "followers", "pairs")
]
BENCHES = ("open_loop", "common_mode", "noise", "step", "startup")


def draft(variant, name="a1"):
    lengths = dict.fromkeys(("pair", "mirror", "turn", "source", "other", "cascode"), 1e-6)
    wanted = Draft({"n": "nmos", "p": "pmos"}, variant, 8e-6, 1e-12,
                   length={**lengths, "follower": 0.5e-6})  # fmt: skip
    return draft_plan(wanted, example_devices(), example_supply(), name=name)


def netlists(*plans, supply=None):
    return write_netlists(plans, supply or example_supply(), example_devices())


def unwrap(text):
    return re.sub(r"\n\+ ", " ", text).splitlines()


@pytest.mark.parametrize("variant", FORMS, ids=str)
def test_the_subcircuit_holds_the_plan_and_nothing_else(variant):
    plan = draft(variant)
    lines = unwrap(netlists(plan)["amplifier.cir"])
    assert lines[0].split() == [".subckt", "a1", *PORTS]
    assert lines[-1] == ".ends a1"
    body = lines[1:-1]
    assert {line[0].upper() for line in body} <= {"M", "R", "C"}
    assert not any(re.search(r"\s0\s", line) for line in body), "ground is no port"
    counts: dict[str, int] = {}
    for line in body:
        if line[0].upper() == "M":
            found = re.search(r"l=(\S+) m=(\d+)$", line)
            counts[line.split()[0][1:]] = int(found[2])
    for place in list_places(variant):
        one = plan.transistors[place]
        names = [name for name in counts if name == place or re.fullmatch(
            rf"{place}(_(p|n|m|s|pm|nm))?(_\d)?", name)]  # fmt: skip
        assert names, place
        assert {counts[name] for name in names} == {one.count}


@pytest.mark.parametrize("variant", FORMS, ids=str)
def test_every_bench_is_one_deck_with_one_analysis(variant):
    files = netlists(draft(variant))
    assert sorted(files) == ["amplifier.cir", *sorted(f"bench_{kind}.cir" for kind in BENCHES)]
    for kind in BENCHES:
        lines = files[f"bench_{kind}.cir"].splitlines()
        assert lines[0].startswith("*")
        assert lines[1:3] == [".include models.inc", ".include amplifier.cir"]
        analyses = [x for x in lines if re.match(r"\.(op|dc|ac|noise|tran)\b", x)]
        assert len(analyses) == 1, kind
        assert not any(line.startswith(".options") for line in lines)
        for name in ("vsupply", "cload", "rload"):
            assert sum(line.startswith(f".param {name}=") for line in lines) == 1
        assert sum(line.startswith("vdd vdd 0") for line in lines) == 1
        assert lines[-1] == ".end"


def test_the_reference_goes_into_the_port_or_out_of_it():
    into = netlists(draft(FORMS[0]))["bench_open_loop.cir"]
    out = netlists(draft(Variant("p", "plain", "resistors")))["bench_open_loop.cir"]
    assert "iref vdd iref 2e-06" in into
    assert "iref iref 0 2e-06" in out


def test_the_open_loop_sweep_goes_far_enough():
    files = write_netlists([example_plan()], example_supply(), example_devices(), gbw={"a1": 37e6})
    line = files["bench_open_loop.cir"].splitlines()[-2].split()
    assert line[:4] == [".ac", "dec", "50", "1"]
    assert float(line[4]) >= 100 * 37e6


def test_the_common_mode_bench_is_flat_with_the_probe_in_the_loop():
    lines = netlists(example_plan())["bench_common_mode.cir"].splitlines()
    assert "vprobe cm_drive cm_gate dc 0 ac 1" in lines
    assert not any(line.startswith("x") for line in lines)
    controls = [line.split() for line in lines if line.startswith("Mcontrol")]
    assert len(controls) == 2
    assert {line[2] for line in controls} == {"cm_gate"}


def test_levels_that_follow_the_supply_or_do_not():
    supply = replace(example_supply(), input_common_mode=Level(0.0, 0.7))
    text = netlists(example_plan(), supply=supply)["bench_open_loop.cir"]
    assert "evcm vcm 0 vdd 0 0.5" in text
    assert "vic vic 0 0.7" in text
    both = replace(supply, input_common_mode=Level(0.5, 0.1))
    text = netlists(example_plan(), supply=both)["bench_open_loop.cir"]
    assert "evic vic_0 0 vdd 0 0.5" in text
    assert "vic vic vic_0 0.1" in text


def test_several_amplifiers_share_one_file():
    second = draft(FORMS[-1], name="a2")
    files = netlists(example_plan(), second)
    assert files["amplifier.cir"].count(".subckt") == 2
    assert "bench_noise_a2.cir" in files
    assert " a2" in files["bench_noise_a2.cir"]
    with pytest.raises(DataFault, match="named a1"):
        netlists(example_plan(), example_plan())


def test_the_step_is_the_swing_that_is_asked_for():
    plan = replace(example_plan(), demands={"swing": Requirement(0.45)})
    line = next(x for x in netlists(plan)["bench_step.cir"].splitlines() if x.startswith("vstep"))
    assert " -0.45 " in line
    assert line.endswith(" 0.45)")


def test_a_load_resistance_of_none():
    plan = replace(example_plan(), load_resistance=float("inf"))
    assert ".param rload=1e+15" in netlists(plan)["bench_noise.cir"]


def test_a_count_beyond_whole_units_is_refused_early():
    with pytest.raises((DataFault, Faults), match="whole number"):
        example_plan().with_place("pair", count=1.25)
