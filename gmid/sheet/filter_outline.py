"""Lays out what a filter is made of."""

from __future__ import annotations

from gmid.sheet.blocks import Block, Grid, Paragraph
from gmid.sheet.data import FilterSheet
from gmid.sheet.words import spell_value

FILTER_PICTURES = (
    ("filter_response", "Response with its mask: ideal, and with the real amplifiers."),
    ("filter_trade_off", "What gain and bandwidth the amplifiers need, one against the other."),
)
"""Figures of a filter, with their captions."""


def lay_out_filter(one: FilterSheet) -> list[Block]:
    """Lay out what a filter is made of.

    Parameters
    ----------
    one : FilterSheet
        The filter.

    Returns
    -------
    list of Block
        Description, facts, sections, elements.

    Examples
    --------
    >>> one = FilterSheet(description="None.", sections=(), elements=(), response=())
    >>> lay_out_filter(one)[0].text
    'None.'
    """
    sections = tuple(
        (
            str(k + 1), spell_value(row.f0, "Hz"), "-" if row.q is None else f"{row.q:.4g}",
            f"{row.k2:.4g}", f"{row.k1:.4g}", f"{row.k0:.4g}",
        )
        for k, row in enumerate(one.sections)
    )  # fmt: skip
    units = {"resistor": "ohm", "capacitor": "F", "transconductor": "S"}
    elements = tuple(
        (row.name, spell_value(row.value, units[row.kind], 5), " ".join(row.nodes))
        for row in one.elements
    )
    blocks: list[Block] = [Paragraph(one.description)]
    if one.facts:
        blocks.append(Grid(("what", "value"), tuple(one.facts)))
    return [
        *blocks,
        Grid(("section", "f0", "Q", "k2", "k1", "k0"), sections, "Sections, normalised to w0."),
        Grid(("element", "value", "nodes"), elements, "Elements of one side."),
    ]
