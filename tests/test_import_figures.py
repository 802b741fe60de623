"""What the figures of an import show: gm against the slope of the current, and missing points."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from builders import Grid, rows, write_csv, write_recipe
from gmid.condition import Condition
from gmid.errors import GmidError
from gmid.sheet.figures import drawing
from gmid.sheet.import_figures import MOST_PANELS, draw_import_figures, draw_missing, draw_slopes
from gmid.sweep.comparing import compare_gm
from gmid.sweep.coverage import Coverage, Trail
from gmid.sweep.importing import import_recipe
from gmid.sweep.recipe_file import read_recipe

GRID = Grid(length=(0.2e-6, 0.4e-6), vsb=(0.0, 0.6))
SHAPE = (2, 2, 8, 41)


@pytest.fixture
def bring(tmp_path):
    """Import columns, and tell what the trail holds."""

    def run(columns, more=""):
        write_csv(tmp_path / "a.csv", columns)
        trail = Trail()
        fault = None
        try:
            import_recipe(read_recipe(write_recipe(tmp_path, "a.csv", more)), trail=trail)
        except GmidError as raised:
            fault = raised
        return trail, fault

    return run


def test_gm_that_fits_the_current_has_a_ratio_of_one(bring):
    trail, fault = bring(rows(GRID))
    assert fault is None
    (sweep,) = trail.sweeps
    found = compare_gm(sweep)
    assert (found.vds, found.vsb, found.derived) == (0.8, 0.0, False)
    assert np.array_equal(found.gm, sweep["gm"][:, 0, 5])
    assert np.nanmax(np.abs(found.ratio - 1)) < 0.01
    assert np.isnan(found.ratio[:, [0, -1]]).all()
    assert np.count_nonzero(np.isfinite(found.ratio)) > 40


def test_gm_that_does_not_fit_is_seen_where_it_does_not(bring):
    columns = rows(GRID)
    columns["gm"] = columns["gm"] * np.where(columns["vgs"] > 0.5, 1.0, 0.3)
    trail, fault = bring(columns)
    assert fault is None
    found = compare_gm(trail.sweeps[0])
    below = (found.vgs < 0.45) & np.isfinite(found.low)
    above = (found.vgs > 0.55) & np.isfinite(found.low)
    assert np.allclose(found.ratio[:, below], 0.3, rtol=0.02)
    assert np.allclose(found.low[above], 1.0, rtol=0.02)
    with drawing():
        figure = draw_slopes(found, "nmos tt/27")
    assert [axes.get_ylabel() for axes in figure.axes] == ["$g_{m}$ [mS]", "ratio [-]"]
    low, high = figure.axes[1].get_ylim()
    assert low < 0.3 < 1.1 < high


def test_a_derived_gm_says_so_and_compares_nothing(bring):
    columns = rows(GRID)
    del columns["gm"]
    trail, _ = bring(columns)
    found = compare_gm(trail.sweeps[0])
    assert found.derived
    with drawing():
        figure = draw_slopes(found, "nmos tt/27")
    (axes,) = figure.axes
    assert "derived from the current" in axes.get_title(loc="left")


def test_a_gm_off_by_a_thousand_is_drawn_though_refused(bring):
    trail, fault = bring({**rows(GRID), "gm": rows(GRID)["gm"] * 1e3})
    assert "1000 times" in str(fault)
    assert np.allclose(np.nanmedian(compare_gm(trail.sweeps[0]).ratio), 1e3, rtol=0.01)
    assert list(draw_import_figures(trail.sweeps, trail.coverages)) == ["gm_nmos_tt_27"]


def test_the_map_holds_every_missing_point_and_every_void_one(bring):
    columns = rows(GRID)
    lost = np.zeros(columns["vgs"].size, dtype=bool)
    lost[[3, 400, 401]] = True
    columns["ro"] = 1 / np.maximum(columns.pop("gds"), 1e-15)
    columns["ro"][700] = 0.0
    gds = '[sweep.quantities]\ngds = { column = "1/ro" }'
    trail, fault = bring({name: values[~lost] for name, values in columns.items()}, gds)
    assert "gds is not a finite number" in str(fault)
    (coverage,) = trail.coverages
    lost[700] = True
    assert np.array_equal(coverage.missing, lost.reshape(SHAPE))
    assert repr(coverage) == "Coverage(nmos tt/27: 2 length x 2 vsb x 8 vds x 41 vgs; 4 missing)"
    with drawing():
        figure = draw_missing(coverage)
    titles = [axes.get_title(loc="left") for axes in figure.axes if axes.axison]
    assert [title.rsplit(": ")[1] for title in titles] == ["1 of 328", "2 of 328", "1 of 328"]
    assert figure.get_suptitle() == "nmos tt/27: 4 of 1312 bias points missing"
    bars = [axes.collections[0].get_paths() for axes in figure.axes if axes.axison]
    assert [len(found) for found in bars] == [1, 1, 1]
    left, low, right, high = bars[0][0].get_extents().extents
    assert left < GRID.vgs[3] < right
    assert (right - left, low < GRID.vds[0] < high) == (pytest.approx(0.05), True)


def test_a_map_of_many_planes_shows_the_worst_and_counts_the_rest():
    shape = (7, 3, 2, 4)
    axes = {name: np.arange(float(size))
            for name, size in zip(("length", "vsb", "vds", "vgs"), shape, strict=True)}  # fmt: skip
    missing = np.zeros(shape, dtype=bool)
    missing[..., 0] = True
    missing[3] = True
    with drawing():
        figure = draw_missing(Coverage("n", Condition("tt", 27.0), axes, missing))
    titles = [a.get_title(loc="left") for a in figure.axes if a.axison]
    assert len(titles) == MOST_PANELS
    assert sum(title.endswith("8 of 8") for title in titles) == 3
    hidden = "not shown: 9 more of length and vsb, with 18 of them"
    assert figure.get_suptitle().splitlines()[1] == hidden


def test_a_device_with_few_points_or_without_gm_has_no_figure(bring):
    trail, _ = bring(rows(GRID))
    (sweep,) = trail.sweeps
    bare = dataclasses.replace(sweep, values={"id": sweep["id"]})
    assert draw_import_figures([bare], trail.coverages) == {}


def test_rows_that_lie_on_no_grid_are_told_so(bring):
    columns = rows(GRID)
    noise = np.random.default_rng(1)
    for name in ("vgs", "vds"):
        columns[name] = columns[name] + noise.uniform(0, 1e-3, columns[name].size)
    trail, fault = bring(columns)
    assert "the 1312 rows of nmos tt/27 lie on no grid" in str(fault)
    assert trail.coverages == []
