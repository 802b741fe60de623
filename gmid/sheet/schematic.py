"""The schematic of an amplifier, drawn from the circuit that is solved and exported."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from gmid.amplifier.plan import AmplifierPlan
from gmid.amplifier.topology import PORTS, build_core
from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import Transistor
from gmid.sheet.drawing import TITLE_SIZE, Box, Word, write_path, write_word
from gmid.sheet.panel import Panel
from gmid.sheet.placement import fill_panels
from gmid.sheet.symbols import Symbol

_GAP = 24.0
_MARGIN = 8.0
_WIDTH = 1030.0
_RAIL_ROOM = 14.0
_FAMILY = "Arial, 'Liberation Sans', Helvetica, 'DejaVu Sans', sans-serif"


@dataclass(frozen=True)
class Placed:
    """A panel, and where on the schematic its own origin lies.

    Parameters
    ----------
    panel : Panel
        Finished.
    x, y : float
        Its origin.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> found = lay_out_schematic(build_core(example_plan()))
    >>> [round(one.y - found[0].y) for one in found][:1]
    [0]
    """

    panel: Panel
    x: float
    y: float

    @property
    def box(self) -> Box:
        """Room on the schematic, title included."""
        inner = _room(self.panel)
        return Box(
            inner.left + self.x, inner.top + self.y, inner.right + self.x, inner.bottom + self.y
        )


def draw_schematic(plan: AmplifierPlan) -> str:
    """Draw the amplifier of a plan, every instance with its name, units and length.

    Parameters
    ----------
    plan : AmplifierPlan
        A single candidate.

    Returns
    -------
    str
        SVG; the same plan gives the same text.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> picture = draw_schematic(example_plan())
    >>> picture.startswith("<svg"), "opposite_p" in picture
    (True, True)
    """
    return write_schematic(lay_out_schematic(build_core(plan)), f"Circuit of {plan.name}")


def lay_out_schematic(circuit: Circuit) -> tuple[Placed, ...]:
    """Place every element of an amplifier in panels, and the panels in rows.

    Parameters
    ----------
    circuit : Circuit
        From `gmid.amplifier.topology.build_core`, with ``vss`` as the lower rail.

    Returns
    -------
    tuple of Placed
        From the upper left corner on.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> found = lay_out_schematic(build_core(example_plan()))
    >>> found[0].panel.title, len(found)
    ('Signal path', 4)
    """
    elements = {one.name: one for one in circuit.elements}
    pair = [one for one in circuit.transistors if one.role == "pair"]
    channel = pair[0].polarity
    rows: list[list[Panel]] = []
    for group in fill_panels(elements, channel, set(PORTS)):
        for panel in group:
            if rows and _width([*rows[-1], panel]) <= _WIDTH:
                rows[-1].append(panel)
            else:
                rows.append([panel])
    return tuple(_stack_rows(rows))


def _room(panel: Panel) -> Box:
    box = panel.box
    up = TITLE_SIZE + 8 + (_RAIL_ROOM if panel.height else 0.0)
    return Box(box.left, box.top - up, box.right, box.bottom + (_RAIL_ROOM if panel.height else 0))


def _width(row: Sequence[Panel]) -> float:
    return sum(one.box.right - one.box.left for one in row) + _GAP * (len(row) - 1)


def _stack_rows(rows: Sequence[Sequence[Panel]]) -> list[Placed]:
    widest = max(_width(row) for row in rows)
    placed, y = [], 0.0
    for row in rows:
        gap = (widest - _width(row)) / (len(row) + 1)
        x = gap
        rooms = [_room(panel) for panel in row]
        for panel, room in zip(row, rooms, strict=True):
            placed.append(Placed(panel, x - room.left, y - room.top))
            x += room.right - room.left + _GAP + gap
        y += max(room.bottom - room.top for room in rooms) + _GAP * 0.75
    return placed


def write_schematic(placed: Sequence[Placed], title: str) -> str:
    """Write placed panels as SVG, words as text.

    Parameters
    ----------
    placed : sequence of Placed
        From `lay_out_schematic`.
    title : str
        For those who cannot see it.

    Returns
    -------
    str
        One ``svg`` element.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> text = write_schematic(lay_out_schematic(build_core(example_plan())), "a1")
    >>> text.count('class="instance"')
    29
    """
    whole = Box.around(one.box for one in placed)
    width = whole.right - whole.left + 2 * _MARGIN
    height = whole.bottom - whole.top + 2 * _MARGIN
    left, top = whole.left - _MARGIN, whole.top - _MARGIN
    head = (
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="{left:.6g} {top:.6g} {width:.6g} '
        f'{height:.6g}" width="{width:.0f}" height="{height:.0f}" class="schematic" '
        f'role="img" font-family="{_FAMILY}" fill="#111">\n<title>{escape(title)}</title>'
    )
    body = "\n".join(_write_panel(one) for one in placed)
    return f"{head}\n{body}\n</svg>\n"


def _write_panel(one: Placed) -> str:
    panel, room = one.panel, _room(one.panel)
    words = [Word(panel.title, room.left, room.top + TITLE_SIZE / 2, "start", "title")]
    lines = [f'<g transform="translate({one.x:.6g} {one.y:.6g})">']
    for rail in panel.drawn_rails:
        path = write_path((rail.start, rail.end))
        lines.append(f'<path d="{path}" fill="none" stroke="#111" stroke-width="2"/>')
        side = -1 if rail.net == "vdd" else 1
        words.append(Word(rail.net, rail.start[0], rail.start[1] + side * 8, "start", "net"))
    wires = "".join(write_path((wire.start, wire.end)) for wire in panel.wires)
    lines.append(f'<path class="wires" d="{wires}" fill="none" stroke="#111" stroke-width="1"/>')
    lines += [f'<circle cx="{x:.6g}" cy="{y:.6g}" r="2.2"/>' for x, y in panel.dots]
    lines += [
        f'<circle cx="{x:.6g}" cy="{y:.6g}" r="2.6" fill="#fff" stroke="#111"/>'
        for x, y in panel.rings
    ]
    lines += [_write_symbol(panel, symbol) for symbol in panel.symbols.values()]
    lines += [write_word(word) for word in (*words, *panel.words)]
    return "\n".join([*lines, "</g>"])


def _write_symbol(panel: Panel, symbol: Symbol) -> str:
    kind = "transistor" if isinstance(panel.elements[symbol.name], Transistor) else "passive"
    strokes = "".join(write_path(points) for points in symbol.strokes)
    lines = [f'<g class="instance" data-name="{symbol.name}" data-kind="{kind}">']
    lines.append(f'<path d="{strokes}" fill="none" stroke="#111" stroke-width="1.4"/>')
    lines += [f'<path d="{write_path(points, close=True)}"/>' for points in symbol.solids]
    lines += [
        f'<circle cx="{x:.6g}" cy="{y:.6g}" r="{r:.6g}" fill="#fff" stroke="#111"/>'
        for x, y, r in symbol.rings
    ]
    lines += [write_word(word) for word in symbol.words]
    return "".join([*lines, "</g>"])
