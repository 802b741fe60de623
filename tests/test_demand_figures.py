"""Figures of a filter: what they show is what the demands say."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.errors import UsageFault
from gmid.filters import FilterSpec, Passives, Tolerance, check_filter, demands_of, trace_response
from gmid.sheet.figures import drawing
from gmid.sheet.filter_figures import draw_filter_figures, draw_response, draw_trade_off

SPEC = FilterSpec(response="chebyshev", order=3, edge=400e3, ripple_db=0.5, capacitor=4e-12,
                  stop_edge=1.6e6, attenuation_db=35.0)  # fmt: skip


@pytest.fixture(scope="module")
def found():
    tolerance = Tolerance(passband_db=0.2, counts="tuned-shape", up_to=10e6)
    return demands_of(SPEC, tolerance, Passives(resistor_spread=0.1, bottom_plate=0.05))


def test_response_shows_what_was_measured(found):
    checked = check_filter(found, found.models)
    curve = trace_response(found, checked, condition="nominal")
    there = np.isfinite(curve.deviation_db)
    worst = float(np.abs(curve.deviation_db[there]).max())
    assert worst == pytest.approx(float(checked.deviation.passband_db), rel=0.03)
    assert np.all(np.diff(curve.frequency) > 0)
    with drawing():
        figure = draw_response(found, [curve])
        top, bottom = figure.axes
        drawn = {line.get_label(): line for line in top.lines}
    assert list(drawn) == ["ideal", "nominal"]
    assert drawn["nominal"].get_xdata()[-1] >= 10e6 / 1e3
    assert "shift" in bottom.lines[0].get_label()
    # mask of the passband and of the stopband
    assert len(top.collections) == 2


def test_trade_off_has_the_demand_on_its_line(found):
    trade = found.trade_off
    assert np.isinf(trade.intrinsic_gain[0])
    there = np.isfinite(trade.intrinsic_gain)
    gain, gm = np.log(trade.intrinsic_gain[there]), np.log(trade.gm_sum[there])
    on_line = np.interp(np.log(trade.chosen[0]), gain[::-1], gm[::-1])
    assert on_line == pytest.approx(np.log(trade.chosen[1]), abs=0.05)
    assert trade.chosen[1] == pytest.approx(found.gm_sum, rel=1e-9)
    assert trade.least_gain < trade.intrinsic_gain.min()
    with drawing():
        axes = draw_trade_off(found).axes[0]
    assert axes.get_yscale() == "log"


def test_files_are_the_same_every_time(found):
    one, two = draw_filter_figures(found), draw_filter_figures(found)
    assert one == two
    assert all(text.startswith(b"<?xml") for text in one.values())


def test_a_figure_needs_a_curve(found):
    with pytest.raises(UsageFault):
        draw_response(found, [])
