"""Lays out what fits one screen: verdict, transistors by place, loops, what breaks first."""

from __future__ import annotations

from gmid.sheet.blocks import Block, Grid, Heading, Paragraph
from gmid.sheet.data import AmplifierSheet, Sheet
from gmid.sheet.limits import tell_limits
from gmid.sheet.outline import lay_out_verdict
from gmid.sheet.words import spell_value


def lay_out_screen(sheet: Sheet) -> list[Block]:
    """Lay out what fits one screen: verdict, transistors, loops, what would break first.

    Parameters
    ----------
    sheet : Sheet
        The data.

    Returns
    -------
    list of Block
        In the order of reading.

    Examples
    --------
    >>> len(lay_out_screen(Sheet(title="T", amplifiers=())))
    2
    """
    blocks: list[Block] = [Heading(sheet.title, 1), *lay_out_verdict(sheet)]
    for one in sheet.amplifiers:
        blocks += [Heading(f"Amplifier {one.name}"), _short_transistor_grid(one)]
        blocks.append(Paragraph(_describe_loops(one)))
        weakest = min(one.transistors, key=lambda row: row.worst_headroom)
        blocks.append(Paragraph(
            f"First to leave saturation: {weakest.name}, with "
            f"{spell_value(weakest.worst_headroom, 'V', 3)} to spare in {weakest.worst_condition}."
        ))  # fmt: skip
        blocks.append(Paragraph(tell_limits(one)))
    return blocks


def _short_transistor_grid(one: AmplifierSheet) -> Grid:
    """One row a place, since both sides are alike."""
    rows, seen = [], set()
    for row in one.transistors:
        if row.role in seen:
            continue
        seen.add(row.role)
        alike = [other for other in one.transistors if other.role == row.role]
        worst = min(alike, key=lambda other: other.worst_headroom)
        rows.append((
            row.role, row.device, spell_value(row.length, "m"),
            f"{row.count}" + (f"x{row.stack}" if row.stack > 1 else ""), spell_value(row.id, "A"),
            f"{row.gm_over_id:.3g}", spell_value(row.vds, "V", 3), spell_value(row.vdsat, "V", 3),
            spell_value(worst.worst_headroom, "V", 3),
            worst.worst_condition,
        ))  # fmt: skip
    heads = (
        "place", "device", "L", "units", "id", "gm/Id", "vds", "vdsat", "headroom",
        "at least in",
    )  # fmt: skip
    first = one.conditions[0]
    caption = (
        f"In {first.corner}/{first.temperature:g} at the nominal supply; headroom, vds less vdsat, "
        "is the least of all conditions and supplies."
    )
    return Grid(heads, tuple(rows), caption)


def _describe_loops(one: AmplifierSheet) -> str:
    def span(values: list[float], unit: str) -> str:
        ends = dict.fromkeys(spell_value(value, unit, 3) for value in (min(values), max(values)))
        return " to ".join(ends)

    rows = one.conditions
    return (
        f"Over {len(rows)} conditions and supplies: gain "
        f"{span([r.dc_gain_db for r in rows], 'dB')}, "
        f"GBW {span([r.gbw for r in rows], 'Hz')}, phase margin "
        f"{span([r.phase_margin for r in rows], 'deg')}; supply current "
        f"{span([r.supply_current for r in rows], 'A')}. Common-mode loop: gain "
        f"{span([r.common_mode.dc_gain_db for r in rows], 'dB')}, GBW "
        f"{span([r.common_mode.gbw for r in rows], 'Hz')}, phase margin "
        f"{span([r.common_mode.loop_margin for r in rows], 'deg')}, settled error "
        f"{span([r.common_mode.settled_error for r in rows], 'V')}."
    )
