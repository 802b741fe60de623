"""What a notebook shows: tables, pages, and the notebook of the demo, which is run."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest

import notebook_walk
from browser import run_browser
from gmid.amplifier.example import example_plan
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.device.example import example_sweep
from gmid.filters import FilterSpec, Tolerance
from gmid.filters.demand import demands_of
from gmid.nomenclature import QUANTITIES
from gmid.sheet.blocks import Heading
from gmid.sheet.data import Sheet
from gmid.sheet.html import write_html
from gmid.sweep.listing import list_html
from gmid.table.saving import save_sweeps
from gmid.table.store import IndexEntry
from gmid.table.table import Table, open_grid_data

HOSTILE = "<script>x</script> & \"y' {z}"


class Strict(HTMLParser):
    """Keeps tags and words; every tag must be closed in its turn."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.open, self.tags, self.words = [], [], []
        self.feed(page)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.open.append(tag)
        self.tags.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        self.words += [data] if data.strip() else []


@pytest.fixture(scope="module")
def device():
    return Device(example_sweep())


@pytest.fixture(scope="module")
def demands():
    spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    return demands_of(spec, Tolerance(passband_db=0.2, counts="shape"))


def test_listings_bring_neither_script_nor_looks(device, demands):
    entry = IndexEntry(HOSTILE, Condition("tt", 27.0), True, "00")
    shown = [
        Table(Path("t.h5"), HOSTILE, (entry,)), device, device.at(length=1e-6, vds=0.6, vgs=0.5),
        device.at(length=1e-6, vds=0.6, vgs=np.linspace(0, 1, 30)), demands,
        demands.demands[0], example_plan(),
    ]  # fmt: skip
    for one in shown:
        page = Strict(one._repr_html_())
        assert {tag for tag, _ in page.tags} <= {
            "div", "b", "table", "thead", "tbody", "tr", "th", "td",
        }  # fmt: skip
        looks = {text for _, attrs in page.tags for text in attrs.values()}
        sides = {f"text-align: {side}" for side in ("left", "right")}
        assert looks <= sides | {f"{side}; white-space: nowrap" for side in sides}, one
        assert len(one._repr_html_()) < 12_000
    assert HOSTILE in " ".join(Strict(shown[0]._repr_html_()).words)


def test_a_listing_without_rows_has_no_table():
    assert list_html("T", ["a"], []) == "<div><b>T</b>\n</div>"


def test_a_batch_shows_its_shape_its_first_points_and_how_many_more(device):
    lengths = np.array([[0.5e-6], [1e-6], [2e-6]])
    point = device.at(length=lengths, vds=0.6, gm_over_id=[5, 10, 15, 20, 25]).scaled(id=10e-6)
    head, names, *rows, rest = repr(point).splitlines()
    assert head == "OperatingPoint(nmos tt/27, shape (3, 5))"
    assert names.split("  ")[0].strip() == "L [um]"
    assert len(rows) == 5
    assert rest == "and 10 more"
    width = np.ravel(point.width)[3] * 1e6
    assert float(rows[3].split()[1]) == pytest.approx(width, rel=5e-4)
    words = Strict(point._repr_html_()).words
    assert words[0] == "nmos tt/27, shape (3, 5)"
    assert words[-1] == "and 5 more"
    none = device.at(length=1e-6, vds=0.6, vgs=np.zeros(0))
    assert repr(none) == "OperatingPoint(nmos tt/27, shape (0,))"
    assert Strict(none._repr_html_()).words == ["nmos tt/27, shape (0,)"]


def test_showing_a_batch_computes_no_more_than_it_shows(device):
    point = device.at(length=1e-6, vds=0.6, vgs=np.linspace(0.2, 1, 5000))
    repr(point)
    point._repr_html_()
    assert point._found == {}


def test_a_single_point_is_told_with_meanings(device):
    point = device.at(length=1e-6, vds=0.6, vgs=0.5)
    words = Strict(point._repr_html_()).words
    for name in point.fields:
        assert QUANTITIES[name].meaning in words
    assert "\n" not in repr(point)


def test_a_point_without_current_is_shown_without_warning(device):
    still = device.at(length=1e-6, vds=0.0, vgs=[0.5, 0.6])
    assert len(repr(still).splitlines()) == 4
    assert still.to_frame()["gm_over_id"].shape == (2,)


def test_frames_hold_the_fields_in_si(device, tmp_path, demands):
    point = device.at(length=[[0.5e-6], [1e-6]], vds=0.6, vgs=[0.4, 0.5, 0.6]).scaled(count=4)
    frame = point.to_frame()
    assert list(frame) == list(point.fields)
    for name in point.fields:
        np.testing.assert_array_equal(frame[name], np.ravel(getattr(point, name)))
    assert frame.attrs["units"]["gm"] == "S"
    assert frame.attrs["label"] == "nmos tt/27"
    single = device.at(length=1e-6, vds=0.6, vgs=0.5).to_frame()
    assert len(single) == 1
    path = tmp_path / "t.h5"
    save_sweeps(path, [example_sweep()], process="ash90")
    listed = open_grid_data(path).to_frame()
    assert listed.drop(columns="digest").to_dict("records") == [
        {"device": "nmos", "corner": "tt", "temperature": 27.0, "nominal": True}
    ]
    table = demands.to_frame()
    assert len(table) == sum(len(one.requirements) for one in demands.demands)
    row = table[(table.amplifier == "A2") & (table.demand == "gm_total")].iloc[0]
    assert row.value == demands.find("A2")["gm_total"].value
    places = example_plan().to_frame().set_index("place")
    assert places.loc["pair", "count"] == 4


def test_a_sheet_stands_in_a_frame_that_nothing_leaves(tmp_path):
    filler = "<p>" + "word " * 3000 + "</p>"
    sheet = Sheet(title=HOSTILE, amplifiers=(), cautions=(filler,), provenance=(("a", "b"),))
    page = tmp_path / "around.html"
    around = '<body style="background: #111; color: #eee"><h1 id="x">N</h1><table id="t"></table>'
    page.write_text(f"<!DOCTYPE html>{around}{sheet._repr_html_()}")
    inside = "document.querySelector('iframe').contentDocument"
    with run_browser(tmp_path / "profile") as browser:
        browser.open(page, width=900)
        before = browser.evaluate(
            "JSON.stringify([...'xt'].map(k => getComputedStyle(document.getElementById(k)).font))"
        )
        assert browser.evaluate(f"{inside}.title") == HOSTILE
        assert browser.evaluate(f"{inside}.scripts.length") == 0
        links = browser.evaluate(f"{inside}.querySelectorAll('nav a').length")
        assert links == 2
        browser.evaluate(f"{inside}.querySelectorAll('nav a')[1].click()")
        here = browser.evaluate(f"[location.href, {inside}.location.href].join(' ')")
        assert here == f"{page.as_uri()} about:srcdoc#part-where-this-comes-from"
        assert browser.evaluate("document.querySelector('iframe').contentWindow.scrollY") > 100
        page.write_text(f"<!DOCTYPE html>{around}")
        browser.open(page, width=900)
        after = browser.evaluate(
            "JSON.stringify([...'xt'].map(k => getComputedStyle(document.getElementById(k)).font))"
        )
    assert before == after


def test_only_the_frame_has_a_base():
    assert "&lt;base" in Sheet(title="T", amplifiers=())._repr_html_()
    assert "<base" not in write_html([Heading("T", 1)], {}, title="T")


def read_cells(path: Path) -> list[dict]:
    return json.loads(path.read_text(encoding="utf-8"))["cells"]


def list_outputs(cell: dict) -> list[dict[str, str]]:
    """The texts a cell showed; drawings and data frames differ from one library to the next."""
    found = []
    for output in cell.get("outputs", []):
        assert output["output_type"] == "execute_result", output
        data = {kind: "".join(text) for kind, text in output["data"].items()}
        kinds = ["text/plain"]
        if "text/html" in data and "dataframe" not in data["text/html"]:
            kinds.append("text/html")
        found.append({kind: data[kind] for kind in kinds} | {"kinds": " ".join(sorted(data))})
    return found


def test_the_notebook_shows_what_happens(tmp_path):
    done = subprocess.run(
        [sys.executable, notebook_walk.__file__, tmp_path / "run.ipynb"],
        capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    stored, run = read_cells(notebook_walk.NOTEBOOK), read_cells(tmp_path / "run.ipynb")
    assert len(stored) == len(run)
    for before, after in zip(stored, run, strict=True):
        assert list_outputs(before) == list_outputs(after), (
            f"{before['source']} shows something else now; if that is meant: "
            "python tests/notebook_walk.py"
        )


def test_the_notebook_is_small_and_of_no_machine():
    raw = notebook_walk.NOTEBOOK.read_text(encoding="utf-8")
    assert len(raw) < 200_000
    assert not re.search(r"[\"' =]/(?:home|root|Users|tmp|work|mnt|opt|usr)/", raw)
    assert str(Path.home()) not in raw
    assert str(notebook_walk.ROOT) not in raw
    cells = read_cells(notebook_walk.NOTEBOOK)
    codes = [cell for cell in cells if cell["cell_type"] == "code"]
    assert [cell["execution_count"] for cell in codes] == list(range(1, len(codes) + 1))
    assert all(cell["outputs"] for cell in codes)
    assert "invented" in "".join(cells[0]["source"])
