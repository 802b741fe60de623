"""A sheet as one self-contained page: no script, no outside request, plain in print and in grey."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from html import escape

from gmid.sheet.blocks import Block, Grid, Heading, Paragraph, Picture, flush_right

_STYLE = """
:root { color-scheme: light; }
* { box-sizing: border-box; }
body { font: 15px/1.45 "DejaVu Sans", Verdana, sans-serif; color: #1a1a1a; background: #fff;
  max-width: 66rem; margin: 1.5rem auto 3rem; padding: 0 1rem; overflow-wrap: break-word; }
h1 { font-size: 1.5rem; line-height: 1.25; margin: 0 0 .7rem; }
h2 { font-size: 1.2rem; margin: 2.4rem 0 .6rem; padding-bottom: .15rem;
  border-bottom: 2px solid #1a1a1a; }
h3 { font-size: 1rem; margin: 1.4rem 0 .4rem; }
p { margin: .5rem 0; max-width: 46rem; }
a { color: inherit; }
nav { font-size: .85rem; margin: .7rem 0; }
nav a { margin-right: 1rem; white-space: nowrap; }
.verdict-met, .verdict-missed { font-weight: bold; padding: .6rem .9rem; max-width: none;
  border: 2px solid #1a1a1a; }
.verdict-missed { background: #1a1a1a; color: #fff; }
.caution { border-left: 4px solid #777; padding-left: .8rem; }
.wide { overflow-x: auto; margin: 0 0 .9rem; } figure .wide { margin: 0; }
table { border-collapse: collapse; font-size: .8rem; line-height: 1.35; }
p.above { font-size: .87em; font-style: italic; margin: 1.1rem 0 .3rem; }
th { text-align: left; border-bottom: 1.5px solid #1a1a1a; vertical-align: bottom; }
td { border-bottom: 1px solid #ccc; vertical-align: top; white-space: nowrap; }
td.long { white-space: normal; min-width: 14rem; }
th, td { padding: .14rem .55rem; }
th:first-child, td:first-child { padding-left: 0; }
th.right, td.right { text-align: right; font-variant-numeric: tabular-nums; }
table.broad { font-size: .74rem; } table.broad th, table.broad td { padding: .14rem .34rem; }
table.broad th:first-child, table.broad td:first-child { padding-left: 0; }
tr.marked td { font-weight: bold; background: #e4e4e4; }
figure { margin: 1.2rem 0; }
figure svg { display: block; width: 100%; height: auto; max-width: 40rem; }
figure svg.schematic { max-width: none; min-width: 52rem; }
figcaption { font-size: .87em; font-style: italic; margin-top: .2rem; }
@media (max-width: 40rem) {
  body { font-size: 14px; margin: .6rem auto 2rem; padding: 0 .7rem; }
  h1 { font-size: 1.25rem; }
}
@page { size: A4; margin: 13mm 12mm; }
@media print {
  body { font-size: 9pt; max-width: none; margin: 0; padding: 0; }
  nav { display: none; } figure { margin: 3mm 0; }
  h1 { font-size: 15pt; } h2 { font-size: 12pt; } h2, h3, p.above { break-after: avoid; }
  table { font-size: 7pt; } td.long { min-width: 0; } th, td { padding: .1rem .3rem; }
  table.broad { font-size: 6pt; width: 100%; }
  table.broad th, table.broad td { padding: 1px 3px; }
  tr, figure { break-inside: avoid; } thead { display: table-header-group; }
  .wide { overflow: visible; margin: 0 0 3mm; } p.above { margin: 3mm 0 1mm; }
  .verdict-missed { background: #fff; color: #000; border-width: 4px; }
  tr.marked td { background: none; border-bottom: 1.5px solid #000; }
  figure svg { max-width: 112mm; } figure svg.schematic { min-width: 0; max-width: none; }
}
"""

_LONG, _BROAD = 48, 11
"""Letters from which a cell is wrapped; columns from which a table is set smaller on paper."""


def write_html(blocks: Sequence[Block], figures: Mapping[str, str], *, title: str) -> str:
    """Write blocks as one page.

    Parameters
    ----------
    blocks : sequence of Block
        In the order of reading.
    figures : mapping of str to str
        SVG text by name.
    title : str
        For the window.

    Returns
    -------
    str
        HTML with style and figures inside.

    Examples
    --------
    >>> page = write_html([Heading("Sheet", 1)], {}, title="a < b")
    >>> "<h1>Sheet</h1>" in page, "a &lt; b" in page
    (True, True)
    """
    names = name_headings(blocks)
    parts = [_write(block, figures, names.get(k, "")) for k, block in enumerate(blocks)]
    if len(names) > 1:
        links = [f'<a href="#{name}">{escape(_text(blocks[k]))}</a>' for k, name in names.items()]
        parts.insert(min(names), f"<nav>{' '.join(links)}</nav>")
    body = "\n".join(parts)
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>{escape(title)}</title>\n<style>{_STYLE}</style>\n</head>\n<body>\n{body}\n"
        "</body>\n</html>\n"
    )


def name_headings(blocks: Sequence[Block]) -> dict[int, str]:
    """Give every heading below the title a name for links.

    Parameters
    ----------
    blocks : sequence of Block
        In the order of reading.

    Returns
    -------
    dict of int to str
        By the place of the heading among the blocks; each name once.

    Examples
    --------
    >>> name_headings([Heading("T", 1), Heading("Filter"), Heading("Filter")])
    {1: 'part-filter', 2: 'part-filter-2'}
    """
    found: dict[int, str] = {}
    for index, block in enumerate(blocks):
        if not isinstance(block, Heading) or block.level == 1:
            continue
        base = "part-" + (re.sub(r"[^a-z0-9]+", "-", block.text.lower()).strip("-") or "x")
        name, count = base, 1
        while name in found.values():
            count += 1
            name = f"{base}-{count}"
        found[index] = name
    return found


def _text(block: Block) -> str:
    return block.text if isinstance(block, Heading) else ""


def _write(block: Block, figures: Mapping[str, str], name: str) -> str:
    if isinstance(block, Heading):
        mark = f' id="{name}"' if name else ""
        return f"<h{block.level}{mark}>{escape(block.text)}</h{block.level}>"
    if isinstance(block, Paragraph):
        return f'<p class="{escape(block.kind)}">{escape(block.text)}</p>'
    if isinstance(block, Picture):
        drawing = embed_svg(figures[block.name], block.name, block.caption)
        return (
            f'<figure id="{escape(block.name)}"><div class="wide">{drawing}</div>'
            f"<figcaption>{escape(block.caption)}</figcaption></figure>"
        )
    return _write_grid(block)


def _write_grid(block: Grid) -> str:
    right = flush_right(block)
    heads = "".join(
        f"<th{_kind(flush)}>{escape(head)}</th>"
        for flush, head in zip(right, block.heads, strict=True)
    )
    rows = []
    for index, row in enumerate(block.rows):
        mark = ' class="marked"' if index in block.marked else ""
        cells = "".join(
            f"<td{_kind(flush, cell)}>{escape(cell)}</td>"
            for flush, cell in zip(right, row, strict=True)
        )
        rows.append(f"<tr{mark}>{cells}</tr>")
    caption = f'<p class="above">{escape(block.caption)}</p>' if block.caption else ""
    broad = ' class="broad"' if len(block.heads) >= _BROAD else ""
    return (
        f'{caption}<div class="wide"><table{broad}><thead><tr>{heads}</tr></thead>'
        f"<tbody>{''.join(rows)}</tbody></table></div>"
    )


def _kind(flush: bool, cell: str = "") -> str:
    kind = "right" if flush else "long" if len(cell) >= _LONG else ""
    return f' class="{kind}"' if kind else ""


def embed_svg(text: str, name: str, caption: str = "") -> str:
    """Make an SVG file fit into a page beside others.

    Parameters
    ----------
    text : str
        The file.
    name : str
        Put before every id, so that figures do not share them.
    caption : str
        What it shows, for those who cannot see it.

    Returns
    -------
    str
        The ``svg`` element alone; a style sheet in it becomes a style of its own.

    Examples
    --------
    >>> embed_svg('<?xml version="1.0"?><svg id="a"><use href="#a"/></svg>', "f")
    '<svg id="f-a"><use href="#f-a"/></svg>'
    """
    svg = text[text.index("<svg") :].strip()
    svg = re.sub(r"<metadata>.*?</metadata>\s*", "", svg, flags=re.S)
    svg = re.sub(r'\bid="', f'id="{name}-', svg)
    svg = re.sub(r'href="#', f'href="#{name}-', svg)
    svg = re.sub(r"url\(#", f"url(#{name}-", svg)
    sheet = re.search(r"<style[^>]*>\s*\*\s*\{([^}]*)\}\s*</style>\s*", svg)
    if sheet:
        svg = svg.replace(sheet[0], "").replace("<svg", f'<svg style="{sheet[1].strip()}"', 1)
    if caption and 'role="img"' not in svg:
        svg = svg.replace("<svg", f'<svg role="img" aria-label="{escape(caption)}"', 1)
    return svg
