"""The direct demands of tests/requests: all readable, indexed, as different as promised."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from gmid.request import read_request

FOLDER = Path(__file__).parent / "requests"
EXPECTED = tomllib.loads((FOLDER / "expected.toml").read_text())
NAMES = sorted(
    file.stem for file in FOLDER.glob("*.toml") if not file.stem.startswith(("expected", "filter_"))
)


def test_every_request_has_an_expected_verdict():
    assert sorted(EXPECTED) == NAMES
    assert {entry["verdict"] for entry in EXPECTED.values()} == {"met", "missed"}


@pytest.mark.parametrize("name", NAMES)
def test_a_request_can_be_read(name):
    request = read_request(FOLDER / f"{name}.toml")
    assert request.demands
    assert request.load_capacitance > 0


def test_they_are_as_many_and_as_different_as_promised():
    requests = {name: read_request(FOLDER / f"{name}.toml") for name in NAMES}
    met = [name for name in NAMES if EXPECTED[name]["verdict"] == "met"]
    assert len(NAMES) >= 12
    assert len(met) >= 9
    assert len(NAMES) - len(met) >= 2
    assert sum(EXPECTED[name]["output"] == "cascoded" for name in met) >= 3
    assert {EXPECTED[name]["input_pair"] for name in met} == {"n", "p"}
    for key, low, high in (("dc_gain", 40, 75), ("gbw", 5e6, 100e6)):
        values = [one.demands[key].value for one in requests.values()]
        assert (min(values), max(values)) == (low, high)
    loads = [one.load_capacitance for one in requests.values()]
    assert min(loads) == pytest.approx(0.3e-12)
    assert max(loads) == pytest.approx(5e-12)
    supplies = {one.supply.voltage for one in requests.values()}
    assert min(supplies) == 1.2
    assert max(supplies) == 1.8
