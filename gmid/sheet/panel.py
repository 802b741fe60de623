"""Panels of a schematic: symbols put in place, terminals joined, every other net by its name."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from gmid.circuit.elements import Capacitor, Element, Resistor, Transistor
from gmid.quantity import format_quantity
from gmid.sheet.drawing import NET_SIZE, Box, Point, Wire, Word
from gmid.sheet.symbols import Symbol, draw_transistor, draw_two

RAILS = ("vdd", "vss")
"""Upper and lower rail."""

_STUB = 9.0
_RING = 2.6


def list_notes(one: Element) -> tuple[str, ...]:
    """Say in short lines what an element is made of.

    Parameters
    ----------
    one : Element
        A transistor, resistor or capacitor with a single value of each kind.

    Returns
    -------
    tuple of str
        Units, units in series, length, and a bulk that is not at its rail; or the value.

    Examples
    --------
    >>> import numpy as np
    >>> from gmid.circuit.elements import Resistor
    >>> list_notes(Resistor("r1", "a", "b", np.array(5e4)))
    ('50 kohm',)
    """
    if isinstance(one, Transistor):
        count = int(np.asarray(one.count))
        lines = [f"{count} unit{'s' if count > 1 else ''}"]
        if one.stack > 1:
            lines.append(f"{one.stack} stacked")
        lines.append(f"L {float(np.asarray(one.length)) * 1e6:.4g} um")
        if one.bulk == one.source and one.source not in RAILS:
            lines.append("own well")
        return tuple(lines)
    if isinstance(one, Resistor):
        return (format_quantity(float(np.asarray(one.resistance)), "ohm", digits=4),)
    if isinstance(one, Capacitor):
        return (format_quantity(float(np.asarray(one.capacitance)), "F", digits=4),)
    return ()


@dataclass(eq=False)
class Panel:
    """One part of a schematic, drawn as for an n-channel input pair.

    Parameters
    ----------
    title : str
        What stands above it.
    elements : mapping of str to Element
        All of the circuit, by name.
    channel : {"n", "p"}
        Of the input pair; with "p" the panel is turned upside down as it is drawn.
    ports : set of str
        Ports not yet drawn, of all panels; those drawn are taken out.
    height : float
        From the upper to the lower rail; 0 for a panel without rails.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> from gmid.amplifier.topology import build_core
    >>> elements = {one.name: one for one in build_core(example_plan()).elements}
    >>> panel = Panel("Pair", elements, "n", {"vip"}, 120)
    >>> panel.put("pair_p", 0, 60, face=-1)
    >>> panel.finish()
    >>> [word.text for word in panel.words][:3]
    ['mirror_p', 'vip', 'tail']
    """

    title: str
    elements: Mapping[str, Element]
    channel: str
    ports: set[str]
    height: float = 0.0
    symbols: dict[str, Symbol] = field(default_factory=dict)
    wires: list[Wire] = field(default_factory=list)
    words: list[Word] = field(default_factory=list)
    rings: list[Point] = field(default_factory=list)
    joined: set[str] = field(default_factory=set)

    @property
    def sign(self) -> float:
        """-1 if it is drawn upside down."""
        return 1.0 if self.channel == "n" else -1.0

    def put(self, name: str, x: float, y: float, *, face: int = -1, vertical: bool = False) -> None:
        """Put an element in place.

        Parameters
        ----------
        name : str
            Its name.
        x, y : float
            Its middle, as for an n-channel pair.
        face : {-1, 1}
            Side of the gate of a transistor; side of the plus end of anything else.
        vertical : bool
            For a resistor or capacitor: plus end above.
        """
        one, at = self.elements[name], (x, self.sign * y)
        notes = list_notes(one)
        if isinstance(one, Transistor):
            self.symbols[name] = draw_transistor(
                name, (one.drain, one.gate, one.source), at, face=face, channel=one.polarity,
                drain_up=one.polarity == "n", notes=notes,
            )  # fmt: skip
            return
        plus, minus = one.nodes
        kind = "resistor" if isinstance(one, Resistor) else "capacitor"
        flip = self.sign < 0 if vertical else face > 0
        self.symbols[name] = draw_two(
            name, kind, (plus, minus), at, notes, vertical=vertical, flip=flip
        )

    def join(self, y: float, *ends: str, left: float | None = None, right: float | None = None,
             above: float | None = None) -> None:  # fmt: skip
        """Join terminals of one net by a horizontal wire, and vertical ones to it.

        Parameters
        ----------
        y : float
            Height of the horizontal wire, as for an n-channel pair.
        *ends : str
            Terminals, such as ``pair_p.d``; those of another net than the first are left out.
        left, right : float, optional
            Lengthen the wire to there, and name the net at that end.
        above : float, optional
            Name the net beside the wire, as for an n-channel pair above it, in the middle of there.
        """
        height = self.sign * y
        net = self._find(ends[0])[0]
        points = []
        for end in ends:
            found, point = self._find(end)
            if found == net:
                points.append(point)
                self.joined.add(end)
        across = [x for x, _ in points] + [x for x in (left, right) if x is not None]
        for x, start in dict.fromkeys(points):
            self._draw(net, (x, start), (x, height))
        self._draw(net, (min(across), height), (max(across), height))
        if above is not None:
            lift = self.sign * NET_SIZE * 0.75
            self.words.append(Word(net, above, height - lift, "middle", "net"))
        for lead, side in ((left, -1), (right, 1)):
            if lead is not None:
                self._name(net, (lead, height), side)

    def finish(self) -> None:
        """Take every terminal that is not joined to its rail, or name its net beside it."""
        for name, symbol in self.symbols.items():
            for key, (net, (x, y)) in symbol.terminals.items():
                if f"{name}.{key}" in self.joined:
                    continue
                middle = (symbol.body.left + symbol.body.right) / 2
                if net in RAILS and self.height:
                    self._draw(net, (x, y), (x, self.rail(net)))
                elif key == "g" or y == (symbol.body.top + symbol.body.bottom) / 2:
                    side = 1 if x > middle else -1
                    self._draw(net, (x, y), (x + side * _STUB, y))
                    self._name(net, (x + side * _STUB, y), side)
                else:
                    out = y + (_STUB if y > (symbol.body.top + symbol.body.bottom) / 2 else -_STUB)
                    self._draw(net, (x, y), (x, out))
                    self._name(net, (x, out), 1)

    def rail(self, net: str) -> float:
        """Give the height of a rail.

        Parameters
        ----------
        net : str
            One of `RAILS`.

        Returns
        -------
        float
            As drawn.
        """
        upper, lower = sorted((0.0, self.sign * self.height))
        return upper if net == RAILS[0] else lower

    @property
    def drawn_rails(self) -> list[Wire]:
        """The rails, from edge to edge."""
        if not self.height:
            return []
        inner = Box.around(one.box for one in self.symbols.values())
        return [
            Wire(net, (inner.left, self.rail(net)), (inner.right, self.rail(net))) for net in RAILS
        ]

    @property
    def dots(self) -> list[Point]:
        """Where three pieces or more of a net meet."""
        found = []
        wires = [*self.wires]
        ends = {(one.net, point) for one in wires for point in (one.start, one.end)}
        for net, point in sorted(ends):
            if len(self._directions(net, point)) > 2:
                found.append(point)
        return found

    @property
    def box(self) -> Box:
        """Room that all of it takes, rails and their names included."""
        boxes = [one.box for one in self.symbols.values()]
        boxes += [one.box for one in self.words]
        boxes += [one.box for one in (*self.wires, *self.drawn_rails)]
        return Box.around(boxes)

    def _find(self, end: str) -> tuple[str, Point]:
        name, key = end.split(".")
        return self.symbols[name].terminals[key]

    def _draw(self, net: str, start: Point, end: Point) -> None:
        if start != end:
            self.wires.append(Wire(net, start, end))

    def _name(self, net: str, at: Point, side: int) -> None:
        x, y = at
        gap = 3.0
        if net in self.ports:
            self.ports.discard(net)
            self.rings.append((x + side * _RING, y))
            gap += 2 * _RING
        anchor = "start" if side > 0 else "end"
        self.words.append(Word(net, x + side * gap, y, anchor, "net"))

    def _directions(self, net: str, point: Point) -> set[tuple[float, float]]:
        """Ways that lead away from a point of a net."""
        x, y = point
        ways = set()
        for wire in self.wires:
            if wire.net == net and wire.holds(point):
                ways |= {
                    (float(np.sign(px - x)), float(np.sign(py - y)))
                    for px, py in (wire.start, wire.end)
                    if (px, py) != point
                }
        for symbol in self.symbols.values():
            for found, place in symbol.terminals.values():
                if found == net and place == point:
                    ways.add(_inwards(symbol, place))
        return ways


def _inwards(symbol: Symbol, place: Point) -> tuple[float, float]:
    """Way from a terminal into its symbol."""
    x, y = place
    body = symbol.body
    if y == body.top:
        return (0.0, 1.0)
    if y == body.bottom:
        return (0.0, -1.0)
    return (1.0, 0.0) if x == body.left else (-1.0, 0.0)
