"""Figures of an amplifier: the curves are those of the predictions, the marks lie on them."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree
from dataclasses import replace

import numpy as np
import pytest
from matplotlib.colors import to_rgb

from gmid.amplifier.example import example_devices, example_plan, example_supply
from gmid.amplifier.plan import Requirement
from gmid.condition import Condition
from gmid.sheet.amplifiers import Reviewed, review_plan
from gmid.sheet.bias_plot import draw_bias, find_nominal, list_chosen, spread_heights
from gmid.sheet.figures import drawing
from gmid.sheet.plots import draw_common_mode, draw_figures, draw_noise, draw_open_loop
from gmid.sheet.sample import sample_review
from sheet_plans import sample_figures


@pytest.fixture(scope="module")
def reviewed() -> Reviewed:
    """The example in two conditions, the second with its amplifier slower by a larger load."""
    devices = example_devices()
    bench = [(devices["nmos"].condition, devices)]
    asked = {"input_noise": Requirement(50e-9, at=1e6), "gbw": Requirement(1e6)}
    plan = replace(example_plan(), demands=asked)
    slow = replace(plan, load_capacitance=4e-12)
    fast, other = (review_plan(one, bench, example_supply()) for one in (plan, slow))
    second = Condition.parse("ss/125")
    return replace(fast, predictions={**fast.predictions, second: other.first})


def _lines(axes: object, label: str = "") -> list[tuple[np.ndarray, np.ndarray]]:
    return [(np.asarray(line.get_xdata()), np.asarray(line.get_ydata()))
            for line in axes.lines if not label or line.get_label() == label]  # type: ignore[attr-defined]  # fmt: skip


def _cross(x: np.ndarray, y: np.ndarray, level: float) -> float:
    """Where a falling curve on a logarithmic axis goes through a level."""
    index = int(np.argmax(y < level))
    part = slice(index - 1, index + 1)
    return float(np.exp(np.interp(-level, -y[part], np.log(x[part]))))


def test_all_figures_are_made_and_the_same_again() -> None:
    figures = sample_figures()
    assert list(figures) == [
        f"a1_{name}" for name in ("schematic", "open_loop", "common_mode", "bias", "noise")
    ]
    for name, text in figures.items():
        root = ElementTree.fromstring(text)
        assert root.tag == "{http://www.w3.org/2000/svg}svg", name
        assert len(list(root.iter("{http://www.w3.org/2000/svg}path"))) > 20, name
    assert draw_figures(sample_review()) == figures


@pytest.mark.parametrize("kind", ["open_loop", "common_mode"])
def test_curves_cross_where_the_sheet_says(reviewed: Reviewed, kind: str) -> None:
    with drawing():
        figure = {"open_loop": draw_open_loop, "common_mode": draw_common_mode}[kind](reviewed)
    upper, lower = figure.axes
    for index, case in enumerate(reviewed.predictions.values()):
        nominal = find_nominal(case)
        measured = case.signal if kind == "open_loop" else case.common_mode
        gbw, margin = float(measured.gbw[nominal]), float(measured.phase_margin[nominal])
        x, y = _lines(upper)[index]
        assert y[0] == pytest.approx(float(measured.dc_gain_db[nominal]), abs=0.1)
        assert _cross(x, y, 0.0) == pytest.approx(gbw, rel=3e-3)
        x, y = _lines(lower)[index]
        assert 180 + np.interp(np.log(gbw), np.log(x), y) == pytest.approx(margin, abs=0.3)


def test_the_worst_is_marked(reviewed: Reviewed) -> None:
    with drawing():
        upper, lower = draw_open_loop(reviewed).axes
    first, second = reviewed.predictions.values()
    assert second.signal.gbw[1] < first.signal.gbw[1]
    words = upper.texts[0].get_text()
    assert words.startswith(f"lowest GBW {second.signal.gbw[1] / 1e6:.2f}"[:16])
    assert upper.texts[0].xy == pytest.approx((float(second.signal.gbw[1]), 0.0))
    assert first.signal.phase_margin[1] < second.signal.phase_margin[1]
    margin = float(first.signal.phase_margin[1])
    assert lower.texts[0].get_text() == f"lowest phase margin {margin:.1f} deg\nin tt/27"
    assert lower.texts[0].xy[1] == pytest.approx(margin - 180)


def test_a_gain_below_one_is_said(reviewed: Reviewed) -> None:
    devices = example_devices()
    plan = replace(example_plan(), load_resistance=100.0)
    weak = review_plan(plan, [(devices["nmos"].condition, devices)], example_supply())
    with drawing():
        upper, lower = draw_open_loop(weak).axes
    assert upper.get_title(loc="left") == "The gain never exceeds 1."
    assert not upper.texts
    assert not lower.texts
    assert max(_lines(upper)[0][1]) < 0


def test_chosen_points_lie_on_the_curves_of_their_length(reviewed: Reviewed) -> None:
    with drawing():
        figure = draw_bias(reviewed)
    chosen = list_chosen(reviewed.first)
    assert sorted(one.place for one in chosen) == sorted(reviewed.plan.transistors)
    drawn = [text.get_text() for axes in figure.axes for text in axes.texts]
    assert sorted(drawn) == sorted(reviewed.plan.transistors)
    for one in chosen:
        axes = figure.axes[["nmos", "pmos"].index(one.device)]
        ((x, y),) = _lines(axes, f"L = {one.length * 1e6:.4g} \N{MICRO SIGN}m")
        assert one.length == pytest.approx(reviewed.plan.transistors[one.place].length)
        at = float(np.interp(np.log(one.normalized_current * 1e6), np.log(x), y))
        assert one.gm_over_id == pytest.approx(at, rel=0.02)
        spot = next(text.xy for text in axes.texts if text.get_text() == one.place)
        assert spot == pytest.approx((one.normalized_current * 1e6, one.gm_over_id))


def test_names_of_points_stand_apart_in_the_order_of_the_points() -> None:
    wanted = [5.0, 5.1, 5.2, 18.0, 0.0, 19.9, 19.8]
    found = spread_heights(wanted, 20.0, 1.0)
    order = np.argsort(wanted)
    assert np.all(np.diff(np.array(found)[order]) >= 1.0 - 1e-12)
    assert min(found) >= 0
    assert max(found) <= 20.0
    assert found[3] == 18.0
    assert found[:3] == pytest.approx([4.1, 5.1, 6.1])


def test_noise_is_that_of_the_predictions_and_its_largest_shares(reviewed: Reviewed) -> None:
    with drawing():
        axes = draw_noise(reviewed).axes[0]
    ((x, total),) = _lines(axes, "total, tt/27")
    expected = reviewed.first.noise([1e6]).input_density[1, 0]
    at = np.exp(np.interp(np.log(1e6), np.log(x), np.log(total)))
    assert at * 1e-9 == pytest.approx(float(expected), rel=2e-3)
    labels = axes.get_legend_handles_labels()[1]
    places = [label for label in labels if label in reviewed.plan.transistors]
    assert len(places) == 4
    parts = np.sum([_lines(axes, place)[0][1] ** 2 for place in places], axis=0)
    assert np.all(parts <= total**2 * (1 + 1e-9))
    assert np.all(parts >= 0.5 * total**2)
    ((where, asked),) = _lines(axes, "at most, as asked")
    assert (where[0], asked[0]) == pytest.approx((1e6, 50.0))


def test_more_conditions_than_colours_are_told_apart(reviewed: Reviewed) -> None:
    case = reviewed.first
    names = [f"tt/{degrees}" for degrees in range(0, 100, 10)]
    many = replace(reviewed, predictions={Condition.parse(name): case for name in names})
    with drawing():
        lines = draw_open_loop(many).axes[0].lines[: len(names)]
    looks = {(line.get_color(), str(line._dash_pattern)) for line in lines}
    assert len(looks) == len(names)


def test_marks_and_words_are_dark_on_white(reviewed: Reviewed) -> None:
    with drawing():
        figure = draw_bias(reviewed)
    for text in figure.axes[0].texts:
        assert max(to_rgb(text.get_color())) < 0.3
