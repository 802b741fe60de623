"""``gmid filter`` and ``gmid new request``."""

from __future__ import annotations

import pytest

from gmid.request.reading import parse_request

FILTER = """\
format = 1
title = "Flow-meter receive channel, first stage"
[process]
table = "none.h5"
[process.devices]
n = "nmos"
p = "pmos"
[supply]
voltage = "1.8 V"
reference_current = "2 uA"
[filter]
response = "butterworth"
order = 3
edge = "300 kHz"
swing = "0.5 V"
capacitor = "4 pF"
[tolerance]
passband = "0.3 dB"
counts = "tuned-shape"
"""


@pytest.fixture
def request_file(tmp_path):
    """Write a request, with changes."""

    def write(*change: str):
        file = tmp_path / "request.toml"
        file.write_text(FILTER.replace(*change) if change else FILTER, encoding="utf-8")
        return file

    return write


def test_sections_elements_and_demands_are_printed(gmid, request_file):
    run = gmid("filter", request_file())
    assert run.code == 0, run.err
    for words in (
        "Butterworth lowpass of order 3, edge 300 kHz; active-RC.",
        "Sections, normalised to w0.",
        "R1_in_a",
        "Why: amplifier A",
        "What such amplifiers do to each section",
    ):
        assert words in run.out
    assert "amplifier A1 of section 1" in gmid("filter", request_file(), "--full").out


def test_the_json_has_the_documented_fields(gmid, request_file):
    found = gmid("filter", request_file(), "--json").json
    assert found["format"] == 1
    assert [set(one) for one in found["filter"]["sections"]] == [{"f0", "q", "k2", "k1", "k0"}] * 2
    for one in found["filter"]["elements"]:
        assert {"name", "kind", "value", "nodes"} <= set(one)
    # Butterworth 1930: the pole pair of the third order has Q = 1.
    assert sorted(one["q"] or 0.0 for one in found["filter"]["sections"]) == pytest.approx([0, 1])
    assert len(found["amplifiers"]) == 3
    demand = found["amplifiers"][0]["demands"]["gm_total"]
    assert set(demand) == {"value", "unit", "because"}
    assert "tuned-shape" in demand["because"]


def test_demands_as_csv(gmid, request_file):
    lines = gmid("filter", request_file(), "--csv").out.splitlines()
    assert lines[0] == "amplifier,demand,value,unit,because"
    assert sum(line.startswith("a1,gm_total,") for line in lines) == 1


def test_figures_are_written(gmid, request_file, tmp_path):
    out = tmp_path / "figures"
    run = gmid("filter", request_file(), "-o", out)
    assert run.code == 0, run.err
    assert {file.name for file in out.iterdir()} == {"filter_response.svg", "filter_trade_off.svg"}
    assert gmid("filter", request_file(), "-o", out).code == 1


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (('edge = "300 kHz"\n', ""), "filter.edge"),
        (("order = 3", 'kind = "bandpass"\norder = 3'), "edge"),
        (('"0.3 dB"', '"1e-7 dB"'), "tolerance"),
        (("[filter]", "[fliter]"), "filter"),
    ],
)
def test_faults_are_told_and_nothing_else_happens(gmid, request_file, change, words):
    run = gmid("filter", request_file(*change))
    assert run.code == 1
    assert words in run.err
    assert run.out == ""


def test_a_request_without_filter_says_so(gmid, request_file):
    text = 'demands]\ngbw = "1 MHz"\nload_capacitance = "1 pF"\n[amplifier]\n'
    body = FILTER[: FILTER.index("filter]")] + text
    file = request_file()
    file.write_text(body, encoding="utf-8")
    run = gmid("filter", file)
    assert run.code == 1
    assert "has no [filter]" in run.err


def test_the_starter_request_is_a_request(gmid, tmp_path):
    file = tmp_path / "my.toml"
    assert gmid("new", "request", "-o", file).code == 0
    text = file.read_text(encoding="utf-8")
    request = parse_request(text)
    assert request.spec is not None
    assert request.spec.order == 5
    # With the commented demands in the place of the filter it is one as well.
    start = text.index("# Either a filter")
    head, tail = text[:start], text[text.index("# [demands]") :]
    direct = parse_request(head + "\n".join(line[2:] for line in tail.splitlines()))
    assert {"dc_gain", "gbw", "input_noise"} <= set(direct.demands)


def test_reading_a_request_needs_no_table(gmid, request_file):
    assert gmid("filter", request_file()).code == 0
