"""Blocks as Markdown and as a page: everything there, nothing let through unescaped."""

from __future__ import annotations

import re
from collections import Counter
from html.parser import HTMLParser

import pytest

from gmid.sheet.blocks import Block, Grid, Heading, Paragraph, Picture, flush_right, is_numeric
from gmid.sheet.data import Sheet
from gmid.sheet.html import embed_svg, write_html
from gmid.sheet.markdown import write_markdown
from gmid.sheet.outline import lay_out
from gmid.sheet.sample import sample_amplifier
from sheet_plans import sample_figures

HOSTILE = '<script>alert("x")</script> & <b>|`*</b>'
VOID = {"meta", "br", "img", "hr", "link", "input"}


class Reader(HTMLParser):
    """Collects tags, ids, references and text; balanced tags or it complains."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.stack: list[str] = []
        self.tags: Counter[str] = Counter()
        self.ids: list[str] = []
        self.references: list[str] = []
        self.texts: list[str] = []
        self.feed(text)
        self.close()
        assert self.stack == []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags[tag] += 1
        if tag not in VOID:
            self.stack.append(tag)
        self._note(attrs)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags[tag] += 1
        self._note(attrs)

    def handle_endtag(self, tag: str) -> None:
        assert self.stack, tag
        assert self.stack.pop() == tag

    def handle_data(self, data: str) -> None:
        self.texts.append(data)

    def _note(self, attrs: list[tuple[str, str | None]]) -> None:
        for key, value in attrs:
            assert not key.startswith("on"), key
            if key == "id":
                self.ids.append(value or "")
            if key.endswith("href") or key == "src":
                self.references.append(value or "")
            self.references += re.findall(r"url\(([^)]*)\)", value or "")


@pytest.fixture(scope="module")
def figures() -> dict[str, str]:
    return dict(sample_figures())


@pytest.fixture(scope="module")
def blocks(figures: dict[str, str]) -> list[Block]:
    sheet = Sheet(
        title="Level gauge", amplifiers=(sample_amplifier(),), cautions=("Typical only.",),
        provenance=(("table", "0123"),), figures=figures,
    )  # fmt: skip
    return lay_out(sheet)


def test_cells_that_start_with_a_number_are_set_flush_right() -> None:
    words = {"12.3 MHz": True, "-3": True, "+4 %": True, "-": True, "": True, "1e-3 V": True,
             "pair": False, "tt/27": False, "vop 3": False, "MISSED  -3": False}  # fmt: skip
    assert {word: is_numeric(word) for word in words} == words
    grid = Grid(("a", "b", "c"), (("x", "1", "2"), ("3", "4", "y")))
    assert flush_right(grid) == [False, True, False]
    assert flush_right(Grid(("a",), ())) == [False]


def test_every_cell_and_word_is_in_the_markdown(blocks: list[Block]) -> None:
    text = write_markdown(blocks)
    assert text.startswith("# Level gauge\n")
    assert "> Typical only." in text
    for block in blocks:
        if isinstance(block, Grid):
            for row in block.rows:
                line = "| " + " | ".join(cell or " " for cell in row) + " |"
                assert line in text
        elif isinstance(block, Picture):
            assert f"![{block.caption}]({block.name}.svg)" in text
        else:
            assert block.text in text


def test_tables_of_the_markdown_have_as_many_cells_in_every_row(blocks: list[Block]) -> None:
    for part in write_markdown(blocks).split("\n\n"):
        lines = part.splitlines()
        if lines[0].startswith("|"):
            assert len({len(re.findall(r"(?<!\\)\|", line)) for line in lines}) == 1
            assert re.fullmatch(r"\|(---\||--:\|)+", lines[1])


def test_a_bar_in_a_cell_does_not_split_it() -> None:
    text = write_markdown([Grid(("a|b",), (("c|d",), ("",)))])
    assert text == "| a\\|b |\n|---|\n| c\\|d |\n|   |\n"


def test_marks_and_tags_in_words_stay_words_in_the_markdown() -> None:
    blocks = [Paragraph("a <b> *c* `d` \\ e_f"), Picture("f", "2*3"), Grid(("x",), (("<i>",),))]
    text = write_markdown(blocks)
    assert text == (
        "a \\<b> \\*c\\* \\`d\\` \\\\ e_f\n\n![2\\*3](f.svg)\n\n*2\\*3*\n\n"
        "| x |\n|---|\n| \\<i> |\n"
    )


def test_every_cell_and_word_is_in_the_page(blocks: list[Block], figures: dict[str, str]) -> None:
    page = Reader(write_html(blocks, figures, title="Level gauge"))
    seen = set(page.texts)
    for block in blocks:
        if isinstance(block, Grid):
            wanted = {*block.heads, *(cell for row in block.rows for cell in row)} - {""}
            assert wanted <= seen
        elif not isinstance(block, Picture):
            assert block.text in seen
    assert page.tags["table"] == sum(isinstance(block, Grid) for block in blocks)
    assert page.tags["svg"] == sum(isinstance(block, Picture) for block in blocks) == 5


def test_ids_are_unique_and_every_reference_is_inside(
    blocks: list[Block], figures: dict[str, str]
) -> None:
    page = Reader(write_html(blocks, figures, title="Level gauge"))
    assert len(page.ids) == len(set(page.ids))
    assert len(page.references) > 100
    for reference in page.references:
        assert reference.startswith("#")
        assert reference[1:] in page.ids
    assert page.tags["script"] == page.tags["link"] == page.tags["img"] == page.tags["iframe"] == 0
    assert page.tags["style"] == 1


def test_the_same_figure_twice_and_headings_alike_keep_their_ids_apart(
    figures: dict[str, str],
) -> None:
    twice = {"one": figures["a1_noise"], "two": figures["a1_noise"]}
    blocks = [Heading("T", 1), Heading("A/B"), Picture("one", "x"), Heading("a b"),
              Picture("two", "x"), Heading("***")]  # fmt: skip
    page = Reader(write_html(blocks, twice, title="T"))
    assert len(page.ids) == len(set(page.ids))
    assert {"part-a-b", "part-a-b-2", "part-x"} <= set(page.ids)


def test_hostile_words_stay_words() -> None:
    figure = {"f": '<svg xmlns="http://www.w3.org/2000/svg"><path d="M0 0"/></svg>'}
    blocks = [Heading(HOSTILE, 1), Heading(HOSTILE), Heading(HOSTILE), Paragraph(HOSTILE),
              Paragraph(HOSTILE, "caution"), Grid((HOSTILE,), ((HOSTILE,),), HOSTILE),
              Picture("f", HOSTILE)]  # fmt: skip
    page = Reader(write_html(blocks, figure, title=HOSTILE))
    assert page.tags["script"] == page.tags["b"] == 0
    # title, three headings, two links, two paragraphs, head, cell, two captions
    assert page.texts.count(HOSTILE) == 12


def test_missed_rows_and_verdicts_are_marked() -> None:
    blocks = [Paragraph("MISSED", "verdict-missed"),
              Grid(("a",), (("1",), ("2",)), marked=frozenset({1}))]  # fmt: skip
    page = write_html(blocks, {}, title="T")
    assert '<p class="verdict-missed">MISSED</p>' in page
    assert page.count('<tr class="marked">') == 1
    assert '<tr class="marked"><td class="right">2</td></tr>' in page
    assert write_markdown(blocks).startswith("**MISSED**\n")


def test_a_figure_without_drawing_is_an_error() -> None:
    with pytest.raises(KeyError):
        write_html([Picture("absent", "x")], {}, title="T")


def test_a_style_sheet_of_a_figure_stays_with_the_figure() -> None:
    text = (
        '<?xml version="1.0"?>\n<!DOCTYPE svg>\n<svg><metadata>x</metadata><defs>'
        '<style type="text/css">*{stroke-linejoin: round}</style></defs></svg>\n'
    )
    assert embed_svg(text, "f", 'a "b"') == (
        '<svg role="img" aria-label="a &quot;b&quot;" style="stroke-linejoin: round">'
        "<defs></defs></svg>"
    )
