"""Lays a sheet out: what is said in which order, in words and tables."""

from __future__ import annotations

from collections.abc import Sequence

from gmid.sheet.blocks import Block, Grid, Heading, Paragraph, Picture
from gmid.sheet.data import AmplifierSheet, CheckRow, Sheet
from gmid.sheet.filter_outline import FILTER_PICTURES, lay_out_filter
from gmid.sheet.limits import tell_limits
from gmid.sheet.words import spell_name, spell_value

_VOLTAGES = ("vgs", "vds", "vsb", "vdsat", "headroom", "worst_headroom")

FORMS = {
    "resistors": "resistors at the outputs",
    "followers": "source followers before resistors",
    "pairs": "two difference pairs at the outputs",
}
"""How the common mode is sensed, in words."""


def lay_out(sheet: Sheet) -> list[Block]:
    """Lay a sheet out in full.

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
    >>> [block.text for block in lay_out(Sheet(title="T", amplifiers=()))[:2]]
    ['T', 'MET: every check holds.']
    """
    blocks: list[Block] = [Heading(sheet.title, 1), *lay_out_verdict(sheet)]
    if sheet.filter:
        blocks += [Heading("Filter"), *lay_out_filter(sheet.filter)]
        blocks += _pictures(sheet, "", FILTER_PICTURES)
    for one in sheet.amplifiers:
        blocks += lay_out_amplifier(one, sheet)
    blocks.append(Heading("Cautions"))
    blocks += [Paragraph(text, "caution") for text in sheet.cautions]
    blocks += [
        Heading("Where this comes from"),
        Grid(("what", "which"), tuple(sheet.provenance)),
    ]
    return blocks


def lay_out_verdict(sheet: Sheet) -> list[Block]:
    """Say in a sentence and a table whether it holds, the least margin first.

    Parameters
    ----------
    sheet : Sheet
        The data.

    Returns
    -------
    list of Block
        Verdict and checks.

    Examples
    --------
    >>> lay_out_verdict(Sheet(title="T", amplifiers=()))[0].kind
    'verdict-met'
    """
    kind = f"verdict-{sheet.verdict}" if sheet.is_demanded else "plain"
    blocks: list[Block] = [Paragraph(write_sentence(sheet), kind)]
    if sheet.sentence:
        blocks.append(Paragraph(sheet.sentence))
    if sheet.supply:
        blocks.append(Paragraph(sheet.supply))
    checks = sheet.checks
    if checks:
        several = len({part for part, _ in checks}) > 1
        heads: tuple[str, ...] = ("of", "check", "required", "achieved", "margin", "worst in")
        rows = tuple(_check_cells(part, check) for part, check in checks)
        marked = frozenset(index for index, (_, check) in enumerate(checks) if not check.met)
        if not several:
            heads, rows = heads[1:], tuple(row[1:] for row in rows)
        blocks.append(Grid(heads, rows, "Every check, the least margin first.", marked))
    return blocks


def write_sentence(sheet: Sheet) -> str:
    """Say the verdict and what is tightest.

    Parameters
    ----------
    sheet : Sheet
        The data.

    Returns
    -------
    str
        One sentence.

    Examples
    --------
    >>> write_sentence(Sheet(title="T", amplifiers=()))
    'MET: every check holds.'
    """
    checks = sheet.checks
    if not checks:
        return "MET: every check holds."
    if not sheet.is_demanded:
        return "Nothing is demanded of this amplifier; the checks are those of the house."
    part, worst = checks[0]
    where = f" of {part}" if len({name for name, _ in checks}) > 1 else ""
    if sheet.is_met:
        return (
            f"MET: every check holds; {spell_name(worst.name)}{where} has the least margin, "
            f"{worst.margin:.1%} in {worst.condition}."
        )
    missed = sum(not check.met for _, check in checks)
    return (
        f"MISSED: {missed} of {len(checks)} checks; {spell_name(worst.name)}{where} is furthest "
        f"off, {spell_value(worst.achieved, worst.unit)} for "
        f"{spell_value(worst.required, worst.unit)} in {worst.condition}."
    )


def _check_cells(part: str, check: CheckRow) -> tuple[str, ...]:
    mark = "" if check.met else "MISSED  "
    return (
        part,
        spell_name(check.name),
        spell_value(check.required, check.unit),
        spell_value(check.achieved, check.unit),
        f"{mark}{check.margin:+.1%}",
        check.condition,
    )


def lay_out_amplifier(one: AmplifierSheet, sheet: Sheet) -> list[Block]:
    """Lay out everything about one amplifier.

    Parameters
    ----------
    one : AmplifierSheet
        The amplifier.
    sheet : Sheet
        The sheet around it, for its figures.

    Returns
    -------
    list of Block
        In the order of reading.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_amplifier
    >>> one = sample_amplifier()
    >>> lay_out_amplifier(one, Sheet(title="T", amplifiers=(one,)))[0].text
    'Amplifier a1'
    """
    blocks: list[Block] = [Heading(f"Amplifier {one.name}"), Paragraph(describe_amplifier(one))]
    blocks += _lay_out_demands(one)
    blocks += _pictures(sheet, one.name, (("schematic", "Circuit, drawn from the netlist."),))
    blocks += [_transistor_grid(one), _passive_grid(one)]
    blocks += lay_out_conditions(one)
    blocks += _lay_out_shares(one)
    blocks += _pictures(sheet, one.name, (
        ("open_loop", "Gain into the load, every condition at the nominal supply."),
        (
            "common_mode",
            "Gain of the common-mode loop, every condition at the nominal supply, as the bench "
            "measures it; and the worst one without the load of the bench's probe.",
        ),
        ("bias", "gm/Id over normalised current, with the points chosen."),
        ("noise", "Input noise density, and the places that make most of it."),
    ))  # fmt: skip
    return blocks


def _pictures(sheet: Sheet, part: str, wanted: Sequence[tuple[str, str]]) -> list[Block]:
    prefix = f"{part}_" if part else ""
    return [
        Picture(f"{prefix}{name}", caption)
        for name, caption in wanted
        if f"{prefix}{name}" in sheet.figures
    ]


def describe_amplifier(one: AmplifierSheet) -> str:
    """Say in words what an amplifier is.

    Parameters
    ----------
    one : AmplifierSheet
        The amplifier.

    Returns
    -------
    str
        A few sentences.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_amplifier
    >>> describe_amplifier(sample_amplifier())[:48]
    'Fully differential current-mirror amplifier with'
    """
    load = spell_value(one.load_capacitance, "F")
    if one.load_resistance is not None:
        load += f" and {spell_value(one.load_resistance, 'ohm')}"
    parts = [
        f"Fully differential current-mirror amplifier with {one.input_pair}-channel input and "
        f"{one.output} outputs; common mode sensed by {FORMS[one.common_mode_sense]}.",
        f"Each output drives {load}. Gate area {one.gate_area * 1e12:.4g} um^2.",
        _describe_input_range(one.input_range),
        tell_limits(one),
    ]
    if one.positions:
        parts.insert(0, f"At {', '.join(one.positions)} of the filter.")
    if one.multiple > 1:
        parts.append(f"It is {one.multiple} base amplifiers in parallel: all counts times that.")
    if one.ratio_to_floor is not None:
        parts.append(
            f"It draws {one.ratio_to_floor:.2f} times the floor, the current that its gm_total "
            "needs at the largest usable gm/Id of an ideal mirror stage."
        )
    if one.offset_sigma is not None:
        parts.append(
            f"At one sigma of mismatch: input offset {spell_value(one.offset_sigma, 'V', 3)}"
        )
    if one.supply_rejection_db is not None and one.common_mode_rejection_db is not None:
        parts[-1] += (
            f", supply rejection {one.supply_rejection_db:.1f} dB, common-mode rejection "
            f"{one.common_mode_rejection_db:.1f} dB at DC; a matched circuit rejects wholly."
        )
    return " ".join(part for part in parts if part)


def _describe_input_range(ends: tuple[float, float]) -> str:
    low, high = ends
    if not low <= high:
        return "No input common mode keeps the saturation margin in every condition."
    return f"Inputs work from {low:.3g} V to {high:.3g} V in every condition."


def _lay_out_demands(one: AmplifierSheet) -> list[Block]:
    if not one.demands:
        return []
    rows = []
    for name, demand in one.demands.items():
        at = f" at {spell_value(demand.at, 'Hz')}" if demand.at is not None else ""
        rows.append((spell_name(name), spell_value(demand.value, demand.unit) + at, demand.because))
    return [Grid(("asked", "value", "because"), tuple(rows), "What was asked, and why.")]


def _transistor_grid(one: AmplifierSheet) -> Grid:
    rows = []
    for row in one.transistors:
        size = f"{row.count}" + (f" x {row.stack} in series" if row.stack > 1 else "")
        rows.append((
            row.name, row.device, spell_value(row.length, "m"), size, row.bulk,
            spell_value(row.id, "A"), f"{row.gm_over_id:.3g}",
            *(spell_value(getattr(row, key), "V", 3) for key in _VOLTAGES), row.worst_condition,
        ))  # fmt: skip
    first = one.conditions[0]
    caption = (
        f"Transistors in {first.corner}/{first.temperature:g} at the nominal supply; units of "
        f"{spell_value(one.transistors[0].unit_width, 'm')} width. Headroom is vds less vdsat."
    )
    heads = (
        "instance", "device", "L", "units", "bulk", "id", "gm/Id [1/V]", "vgs", "vds", "vsb",
        "vdsat", "headroom", "worst", "worst in",
    )  # fmt: skip
    marked = frozenset(k for k, row in enumerate(one.transistors) if row.worst_headroom < 0)
    return Grid(heads, tuple(rows), caption, marked)


def _passive_grid(one: AmplifierSheet) -> Grid:
    units = {"resistor": "ohm", "capacitor": "F"}
    rows = tuple(
        (row.name, row.kind, spell_value(row.value, units[row.kind])) for row in one.passives
    )
    return Grid(("element", "kind", "value"), rows, "Resistors and capacitors inside.")


def lay_out_conditions(one: AmplifierSheet) -> list[Block]:
    """Tabulate what the benches measure, one row a condition and supply.

    Parameters
    ----------
    one : AmplifierSheet
        The amplifier.

    Returns
    -------
    list of Block
        Two tables: the signal path, and the common-mode loop.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_amplifier
    >>> [grid.heads[0] for grid in lay_out_conditions(sample_amplifier())]
    ['condition', 'condition']
    """
    signal, loop = [], []
    for row in one.conditions:
        name = f"{row.corner}/{row.temperature:g}/{row.supply:.4g}"
        noise = {point.frequency: point.density for point in row.input_noise}
        signal.append((
            name, f"{row.dc_gain_db:.2f}", spell_value(row.gbw, "Hz"), f"{row.phase_margin:.1f}",
            spell_value(row.gm_total, "S"), spell_value(noise[1e6], "V/rtHz", 3),
            spell_value(row.supply_current, "A"), spell_value(row.slew_rate, "V/s", 3),
            spell_value(row.settling_time, "s", 3), spell_value(row.output_swing, "V", 3),
        ))  # fmt: skip
        common = row.common_mode
        loop.append((
            name, f"{common.dc_gain_db:.1f}", spell_value(common.gbw, "Hz", 3),
            f"{common.phase_margin:.1f}", f"{common.loop_margin:.1f}",
            f"{common.input_to_output_gain_db:.1f}",
            f"{common.supply_to_output_gain_db:.1f}",
            spell_value(common.settled_error, "V", 3), f"{row.control_share:.1%}",
        ))  # fmt: skip
    heads = (
        "condition", "A0 [dB]", "GBW", "PM [deg]", "gm_total", "noise at 1 MHz", "supply current",
        "slew rate", "settling to 1 %", "swing",
    )  # fmt: skip
    loops = (
        "condition", "loop gain [dB]", "loop GBW", "PM, bench [deg]", "PM [deg]", "in to out [dB]",
        "supply to out [dB]",
        "settled error", "control/direct",
    )  # fmt: skip
    return [
        Grid(heads, tuple(signal), "As the open-loop, noise and step benches measure it."),
        Grid(
            loops,
            tuple(loop),
            "Common-mode loop as its bench measures it, and the phase margin of the loop itself: "
            "the bench's probe does not see the load of the gates it drives.",
        ),
    ]


def _lay_out_shares(one: AmplifierSheet) -> list[Block]:
    roles = [share.role for share in one.noise_shares[0].shares]
    rows = []
    for role in roles:
        found = [
            next((s.share for s in column.shares if s.role == role), 0.0)
            for column in one.noise_shares
        ]
        if max(found) >= 5e-4:
            rows.append((role, *(f"{share:.1%}" for share in found)))
    heads = ("place", *(spell_value(column.frequency, "Hz") for column in one.noise_shares))
    blocks: list[Block] = [Grid(heads, tuple(rows), "Who makes the noise power.")]
    if one.offset_shares:
        rows = [(s.role, f"{s.share:.1%}") for s in one.offset_shares if s.share >= 5e-4]
        blocks.append(Grid(("place", "share"), tuple(rows), "Who makes the offset's variance."))
    return blocks
