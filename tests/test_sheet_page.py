"""The page of a sheet in a real browser: on a wide window, on a phone, and on paper."""

from __future__ import annotations

import re
from collections.abc import Iterator
from pathlib import Path

import pytest

from browser import Browser, run_browser
from gmid.sheet.data import Sheet
from gmid.sheet.html import write_html
from gmid.sheet.outline import lay_out
from gmid.sheet.sample import sample_amplifier
from gmid.sheet.schematic import draw_schematic
from sheet_plans import make_form, sample_figures

WIDTHS = (1200, 390)
PAPER = 703
"""Width between the margins of A4 [px]."""

FIGURES = ("a1_schematic", "a1_open_loop", "a1_common_mode", "a1_bias", "a1_noise")


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Browser]:
    with run_browser(tmp_path_factory.mktemp("profile")) as found:
        yield found


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> Path:
    figures = dict(sample_figures())
    figures["a1_schematic"] = draw_schematic(make_form("n", "cascoded", "followers"))
    sheet = Sheet(
        title="Level gauge, channel filter", amplifiers=(sample_amplifier(),),
        supply="Supply 1.8 V +-10 %.", cautions=("Typical condition only.",),
        provenance=(("table", "0123456789abcdef" * 4),), figures=figures,
    )  # fmt: skip
    path = tmp_path_factory.mktemp("page") / "sheet.html"
    path.write_text(write_html(lay_out(sheet), figures, title=sheet.title), encoding="utf-8")
    return path


@pytest.mark.parametrize("width", WIDTHS)
def test_sections_are_there_in_order(browser: Browser, page: Path, width: int) -> None:
    browser.open(page, width=width)
    heads = browser.evaluate("[...document.querySelectorAll('h1, h2')].map(e => e.innerText)")
    wanted = ["Level gauge, channel filter", "Amplifier a1", "Cautions", "Where this comes from"]
    assert [head for head in heads if head in wanted] == wanted
    tops = browser.evaluate(
        "[...document.querySelectorAll('h1, h2')].map(e => e.getBoundingClientRect().top)"
    )
    assert tops == sorted(tops)
    assert browser.evaluate("document.title") == "Level gauge, channel filter"


@pytest.mark.parametrize("width", WIDTHS)
def test_figures_are_drawn(browser: Browser, page: Path, width: int) -> None:
    browser.open(page, width=width)
    for name in FIGURES:
        box = browser.evaluate(
            f"(b => [b.width, b.height])(document.querySelector('#{name} svg')"
            ".getBoundingClientRect())"
        )
        assert min(box) > 150, (name, box)
        inked = browser.evaluate(
            f"[...document.querySelectorAll('#{name} svg path')].filter(e => "
            "{const b = e.getBoundingClientRect(); return b.width + b.height > 1}).length"
        )
        assert inked > 20, name


@pytest.mark.parametrize("width", WIDTHS)
def test_no_script_no_request_no_error(browser: Browser, page: Path, width: int) -> None:
    browser.open(page, width=width)
    assert browser.evaluate("document.scripts.length") == 0
    requests = browser.list_events("Network.requestWillBeSent")
    assert [one["request"]["url"] for one in requests] == [page.as_uri()]
    complaints = browser.list_events(
        "Runtime.exceptionThrown", "Runtime.consoleAPICalled", "Log.entryAdded"
    )
    assert complaints == []


@pytest.mark.parametrize("width", WIDTHS)
def test_body_does_not_scroll_sideways(browser: Browser, page: Path, width: int) -> None:
    browser.open(page, width=width)
    assert browser.evaluate("document.documentElement.scrollWidth") <= width
    # what is wider scrolls inside its own box
    outside = browser.evaluate(
        "[...document.querySelectorAll('table, svg')].filter(e => !e.closest('.wide')).length"
    )
    assert outside == 0
    scrolled = browser.evaluate(
        "[...document.querySelectorAll('.wide')].filter(e => e.scrollWidth > e.clientWidth).length"
    )
    assert (scrolled > 0) == (width < 600)


def test_names_of_a_schematic_do_not_touch(browser: Browser, page: Path) -> None:
    browser.open(page, width=1200)
    boxes = browser.evaluate(
        "[...document.querySelectorAll('svg.schematic text')].map(e => {const b = "
        "e.getBoundingClientRect(); return [e.textContent, b.left, b.top, b.right, b.bottom]})"
    )
    assert len(boxes) > 100
    shrink = 1.5  # boxes hold the room above and below the letters
    for index, (one, left, top, right, bottom) in enumerate(boxes):
        for other, left2, top2, right2, bottom2 in boxes[index + 1 :]:
            across = min(right, right2) - max(left, left2)
            down = min(bottom, bottom2) - max(top, top2) - 2 * shrink
            assert across <= 0 or down <= 0, (one, other)


def test_nothing_is_cut_off_on_paper(browser: Browser, page: Path) -> None:
    browser.open(page, width=PAPER, media="print")
    rights = browser.evaluate(
        "[...document.querySelectorAll('table, svg, p, h2')]"
        ".map(e => e.getBoundingClientRect().right)"
    )
    assert max(rights) <= PAPER


def test_prints(browser: Browser, page: Path) -> None:
    browser.open(page, width=1200)
    paper = browser.print_pdf()
    assert paper.startswith(b"%PDF-")
    pages = len(re.findall(rb"/Type\s*/Page\b(?!s)", paper))
    assert 3 <= pages <= 8
    width, height = map(float, re.search(rb"/MediaBox\s*\[0 0 (\S+) (\S+)\]", paper).groups())
    assert (width, height) == pytest.approx((595.3, 841.9), abs=1.0)
