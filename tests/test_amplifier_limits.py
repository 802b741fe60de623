"""What ends the swing and the sensing of the common mode, on the prediction and on the sheet."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gmid.amplifier import Prediction, Requirement, Variant, predict
from gmid.condition import Condition
from gmid.sheet.amplifiers import fill_amplifier, review_plan
from gmid.sheet.data import AmplifierSheet, Sheet, to_plain
from gmid.sheet.outline import describe_amplifier, lay_out
from gmid.sheet.terminal import write_terminal
from reference.amplifier_cases import Case, find_devices, make_plan

CONDITIONS = ("tt/27", "ss/-40")


def draft(sense: str) -> Case:
    more = {"follower": "nmos_low"} if sense == "followers" else {}
    return Case("larch180", Variant("n", "plain", sense), "tt/27", 1.8, **more)


def predict_case(case: Case, voltage: float | None = None) -> Prediction:
    plan, supply = make_plan(case)
    return predict(plan, find_devices(case.process, case.condition), supply, voltage=voltage)


def fill(case: Case, swing: float) -> AmplifierSheet:
    plan, supply = make_plan(case)
    plan = replace(plan, demands={"swing": Requirement(swing)})
    bench = [(Condition.parse(name), find_devices(case.process, name)) for name in CONDITIONS]
    return fill_amplifier(review_plan(plan, bench, supply))


@pytest.mark.parametrize("sense", ["resistors", "followers", "pairs"])
def test_several_supplies_are_each_of_them(sense):
    whole = predict_case(draft(sense))
    ends = whole.output_swing().limit
    for k, level in enumerate(whole.voltage):
        one = predict_case(draft(sense), float(level))
        np.testing.assert_allclose(whole.sensing.peak[k], one.sensing.peak, rtol=1e-6)
        assert whole.sensing.starved[k] == one.sensing.starved
        assert ends[k] == one.output_swing().limit


def test_a_smaller_sense_resistor_starves_a_follower_sooner():
    """It takes (vop - von)/(2 R) from the follower of the lower output."""
    case = draft("followers")
    plan, supply = make_plan(case)
    devices = find_devices(case.process, case.condition)
    peaks = []
    for resistance in (100e3, 200e3, 500e3):
        other = replace(plan, sense_resistance=resistance)
        found = predict(other, devices, supply, voltage=1.8).sensing
        peaks.append(float(found.peak))
    assert peaks == sorted(peaks)
    current = float(predict(plan, devices, supply, voltage=1.8).instance_current("follower_n"))
    assert peaks[0] == pytest.approx(2 * 100e3 * current, rel=0.25)


def test_a_pair_of_less_gm_over_id_is_steered_later():
    """A narrower pair has more overdrive, and its range grows with that."""
    case = draft("pairs")
    plan, supply = make_plan(case)
    devices = find_devices(case.process, case.condition)
    count = int(plan.transistors["sense_pair"].count)
    narrow = plan.with_place("sense_pair", length=4 * plan.transistors["sense_pair"].length)
    peaks = [float(predict(one, devices, supply, voltage=1.8).sensing.peak)
             for one in (narrow, plan.with_place("sense_pair", count=4 * count))]  # fmt: skip
    assert peaks[0] > 1.5 * peaks[1]


def test_the_sheet_tells_the_worst_and_where():
    sheet = fill(draft("followers"), 0.4)
    assert sheet.output_limit is not None
    assert sheet.sense_limit is not None
    rows = {f"{row.corner}/{row.temperature:g}/{row.supply:g}": row for row in sheet.conditions}
    for limit, key in ((sheet.output_limit, "output_swing"), (sheet.sense_limit, "sense_range")):
        values = {name: getattr(row, key) for name, row in rows.items()}
        assert limit.value == pytest.approx(min(values.values()))
        assert limit.condition == min(values, key=values.__getitem__)
    assert sheet.output_limit.cause.startswith("follower_tail")
    assert sheet.sense_limit.cause.startswith("follower")
    said = describe_amplifier(sheet)
    assert f"{sheet.output_limit.cause} comes inside the saturation margin." in said
    assert f"{sheet.sense_limit.cause} starves." in said
    plain = to_plain(sheet)
    assert plain["sense_limit"]["cause"] == sheet.sense_limit.cause


def test_a_swing_beyond_the_sensing_is_said():
    sheet = fill(draft("pairs"), 0.5)
    page = write_terminal(lay_out(Sheet(title="T", amplifiers=(sheet,))), width=400)
    assert "starves: less than the 500 mV asked for." in page


def test_resistors_sense_without_a_limit():
    sheet = fill(draft("resistors"), 0.5)
    assert sheet.sense_limit is None
    assert {row.sense_range for row in sheet.conditions} == {None}
    assert "sensed up to" not in describe_amplifier(sheet)
