"""The parts of the search: charts, closed forms, spaces, moves, margins."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.amplifier import Choices, Requirement, Variant, predict
from gmid.amplifier.checks import judge
from gmid.amplifier.example import example_devices, example_plan, example_supply
from gmid.amplifier.search.charts import CURRENTS, draw_chart
from gmid.amplifier.search.combine import WEIGHT
from gmid.amplifier.search.estimate import estimate, solve_current
from gmid.amplifier.search.evaluation import Evaluator, Outcome, Point, Setting
from gmid.amplifier.search.goals import RESERVE, list_goals, measure_margins
from gmid.amplifier.search.moves import list_moves
from gmid.amplifier.search.probes import probe_slew, probe_swing
from gmid.amplifier.search.refine import rate
from gmid.amplifier.search.shared import SharedDevice, share_devices
from gmid.amplifier.search.sketch import Sketch, draw_charts
from gmid.amplifier.search.space import ELEMENTS, Space, make_form
from gmid.amplifier.search.starts import Task
from gmid.errors import DataFault

ROLES = {"n": "nmos", "p": "pmos"}
LENGTHS = (0.5e-6, 1e-6, 2e-6)
LOAD = (2e-12, 1e6)


def make_space(variant: Variant | None = None, **choices: object) -> Space:
    chosen = Choices(**choices)  # type: ignore[arg-type]
    form = make_form(variant or Variant(), ROLES, (), chosen)
    return Space(form, chosen, LENGTHS)


def make_bench():
    devices = example_devices()
    return ((devices["nmos"].condition, devices),)


def find_row(space: Space) -> np.ndarray:
    """Give the example amplifier as a row."""
    plan = example_plan()
    numbers = {
        f"length.{group}": np.array([plan.transistors[members[0]].length])
        for group, members in space.groups.items()
    }
    numbers |= {f"count.{p}": np.array([plan.transistors[p].count]) for p in space.places}
    numbers |= {name: np.array([getattr(plan, name)]) for name in ELEMENTS}
    return space.locate(numbers)


@pytest.mark.parametrize("way", ["diode", "edge", 0.9])
def test_a_chart_says_what_the_device_says(way):
    device = example_devices()["pmos"]
    chart = draw_chart(device, [0.5e-6, 2e-6], way)
    for current in (3e-8, 1e-6, 7e-6):
        vds = float(chart.read("vds", 1, current))
        point = device.at(length=2e-6, vds=vds, id=current, count=1)
        assert chart.read("gm", 1, current) == pytest.approx(float(point.gm), rel=0.01)
        assert chart.read("vgs", 1, current) == pytest.approx(float(point.vgs), abs=1e-3)


def test_a_chart_has_no_values_beyond_the_table():
    chart = draw_chart(example_devices()["nmos"], [2e-6], 0.9)
    assert np.isnan(chart.read("gm", 0, 2 * CURRENTS[-1]))


def test_closed_forms_come_close_to_the_prediction():
    space, plan = make_space(), example_plan()
    task = Task({}, LOAD, make_bench(), example_supply())
    found = predict(plan, example_devices(), example_supply(), voltage=1.8)
    count = {place: float(one.count) for place, one in plan.transistors.items()}
    current = float(found.instance_current("load_p"))
    which = {place: LENGTHS.index(plan.transistors[place].length) for place in space.places}
    sketch = Sketch(
        *(np.array([which[place]]) for place in ("pair", "load", "turn", "turn")),
        *(np.array([current / count[place]]) for place in ("pair", "load")),
        np.array([float(found.instance_current("turn_p")) / count["turn"]]),
        np.array([count["direct"] / count["load"]]), np.array([count["copy"] / count["load"]]),
        np.array([1 - count["opposite"] / count["turn"] / (count["direct"] / count["load"])]),
    )  # fmt: skip
    charts = draw_charts(space, task.book, 0, task.supply, 1.8, 0.3)
    form = estimate(charts, sketch, 1e6)
    assert form.gm_total[0] * current == pytest.approx(float(found.signal.gm_total), rel=0.05)
    noise = np.sqrt(form.noise[0] / current)
    assert noise == pytest.approx(float(found.noise([1e6]).input_density[0]), rel=0.05)
    wanted = {"gbw": Requirement(float(found.signal.gbw))}
    need = solve_current(form, wanted, (2e-12, 1e-6), (0.0, 2e-6))
    assert need[0] == pytest.approx(current, rel=0.10)


def test_counts_are_even_where_both_sides_have_one_and_lengths_respect_the_smallest():
    space = make_space(largest_count=9, smallest_length={"copy": 0.9e-6})
    assert space.values["count.opposite"].tolist() == [2, 4, 6, 8]
    assert space.values["count.tail"].tolist() == list(range(1, 10))
    assert space.values["length.mirror"].tolist() == [1e-6, 2e-6]
    assert make_space(even_counts=False).values["count.pair"][0] == 1


def test_a_smallest_length_beyond_all_of_them_is_an_error():
    with pytest.raises(DataFault, match="no length is left for load, direct, copy"):
        _ = make_space(smallest_length={"load": 9e-6}).values


def test_a_row_reads_back_as_the_plan_it_came_from():
    space, plan = make_space(even_counts=False), example_plan()
    row = find_row(space)[0]
    single = space.single(row, name="a1", load_capacitance=2e-12, load_resistance=1e6)
    for place, one in plan.transistors.items():
        assert single.transistors[place].count == one.count
        assert single.transistors[place].length == pytest.approx(one.length)
    assert type(single.transistors["pair"].count) is int


def test_flavours_are_used_where_their_channel_fits():
    roles = {**ROLES, "pair": "nmos_low", "follower": "nmos_low"}
    known = {"nmos_low": "n"}
    for channel, device in (("n", "nmos_low"), ("p", "pmos")):
        variant = Variant(channel, "plain", "followers")
        form = make_form(variant, roles, ("pmos",), Choices(), known)
        assert form.devices["pair"] == form.devices["follower"] == device
        assert form.bulk("pair") == ("source" if device == "pmos" else "rail")
        assert form.bulk("load") == "rail"


def test_moves_stay_inside_the_space_and_each_is_another_one():
    space = make_space(Variant("p", "cascoded", "followers"))
    corners = (np.zeros_like(space.largest), space.largest, space.largest // 2)
    for row in corners:
        moves = list_moves(space, row)
        assert len(moves) > 40
        assert (moves >= 0).all()
        assert (moves <= space.largest).all()
        assert len({*map(bytes, moves), bytes(row)}) == len(moves) + 1


def test_margins_agree_with_the_judgement():
    demands = {
        "dc_gain": Requirement(40.0), "gbw": Requirement(40e6), "phase_margin": Requirement(60.0),
        "swing": Requirement(0.5), "input_noise": Requirement(30e-9, at=1e6),
        "slew_rate": Requirement(5e6), "gm_total": Requirement(1e-3),
        "excess_pole": Requirement(10e6), "output_current": Requirement(5e-6),
        "common_mode_gain": Requirement(0.0), "supply_current": Requirement(20e-6),
    }  # fmt: skip
    plan, choices = example_plan(), Choices()
    found = predict(plan, example_devices(), example_supply())
    judged = {check.name: check.met for check in judge([found], choices, demands=demands)}
    goals = list_goals(demands, choices, {})
    margins = measure_margins(found, goals).min(axis=0)
    assert {goal.name for goal in goals} >= set(demands)
    for goal, margin in zip(goals, margins, strict=True):
        if goal.name in judged:
            assert (margin + RESERVE >= 0) == judged[goal.name], goal.name


def test_a_swing_is_inside_where_the_prediction_says_so():
    found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    peak = float(found.output_swing(0.05).peak)
    assert probe_swing(found, 0.97 * peak, 0.05) > 0 > probe_swing(found, 1.03 * peak, 0.05)


def test_an_ample_slew_rate_is_told_by_ratios_within_a_tenth():
    found = predict(example_plan(), example_devices(), example_supply(), voltage=1.8)
    assert probe_slew(found, 1.0) == pytest.approx(float(found.slew_rate), rel=0.10)


def make_setting(goals):
    return Setting(share_devices(make_bench(), LENGTHS), example_supply(), goals, LOAD)


def test_evaluation_of_many_is_that_of_each():
    space = make_space(even_counts=False)
    goals = list_goals({"gbw": Requirement(20e6)}, Choices(), {})
    setting = make_setting(goals)
    row = find_row(space)[0]
    rows = np.concatenate([row[None], list_moves(space, row)[:7]])
    points = [Point(0, 1.62), Point(0, 1.8, 1.1)]
    together = Evaluator(space, setting).evaluate(rows, points)
    alone = Evaluator(space, setting).evaluate(rows[5:6], points)
    assert together.margins[5] == pytest.approx(alone.margins[0], abs=1e-6)
    assert together.current[5] == pytest.approx(alone.current[0], rel=1e-9)
    exact = predict(
        example_plan(), example_devices(), example_supply(), voltage=1.8, reference_current=2.2e-6
    )
    assert together.current[0, 1] == pytest.approx(float(exact.supply_current), rel=1e-6)


def test_what_is_not_watched_does_not_count():
    space = make_space(even_counts=False)
    goals = list_goals({"gbw": Requirement(1e12)}, Choices(), {})
    watch = np.array([[goal.name != "gbw" for goal in goals]])
    evaluator = Evaluator(space, make_setting(goals))
    seen = evaluator.evaluate(find_row(space), [Point(0, 1.8)], watch)
    blind = evaluator.evaluate(find_row(space), [Point(0, 1.8)])
    assert np.isinf(seen.margins[0, 0, -1])
    assert blind.violation - seen.violation == pytest.approx(10.0)


def test_a_candidate_without_a_bias_point_is_far_behind_and_does_not_stop_the_others():
    space = make_space(even_counts=False, largest_count=200)
    row = find_row(space)[0]
    broken = row.copy()
    broken[space.column["count.tail"]] = space.largest[space.column["count.tail"]]
    broken[space.column["count.load"]] = 0
    evaluator = Evaluator(space, make_setting(list_goals({}, Choices(), {})))
    outcome = evaluator.evaluate(np.stack([broken, row]), [Point(0, 1.8)])
    assert np.isfinite(outcome.area[1])
    assert outcome.violation[0] > outcome.violation[1]


def test_cost_is_current_or_area_and_what_is_missed():
    margins = np.array([[[0.1, 0.2]], [[0.1, -0.2]]])
    outcome = Outcome(margins, np.array([[1e-6], [1e-6]]), np.array([1e-12, 1e-12]))
    for minimise in ("current", "area"):
        cost = rate(outcome, minimise)
        assert cost[1] - cost[0] == pytest.approx(0.2 * WEIGHT)


def test_a_shared_device_is_the_device():
    device = example_devices()["nmos"]
    lengths, which = np.array([0.5e-6, 2e-6]), [0, 1]
    own, shared = device.model(lengths), SharedDevice([device], LENGTHS).model(lengths)
    found, same = (
        one.current_and_derivatives([0.5, 0.6], 0.9, 0.1, which=which) for one in (own, shared)
    )
    for a, b in zip(found, same, strict=True):
        assert np.allclose(a, b, rtol=1e-9)
    small, alike = (one.small_signal([0.5, 0.6], 0.9, 0.1, which=which) for one in (own, shared))
    assert np.allclose(small.gm, alike.gm, rtol=1e-9)
    assert np.allclose(small.capacitance, alike.capacitance, rtol=1e-9)
