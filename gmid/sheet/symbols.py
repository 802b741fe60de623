"""Symbols of a schematic: transistors, resistors and capacitors with terminals and words."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from gmid.sheet.drawing import Box, Point, Word

_LINE = 11.5


@dataclass(frozen=True)
class Symbol:
    """An element as it is drawn.

    Parameters
    ----------
    name : str
        Its instance.
    terminals : dict of str to (str, (float, float))
        Net and place of each.
    strokes : tuple of tuple of (float, float)
        Lines.
    solids : tuple of tuple of (float, float)
        Filled shapes.
    rings : tuple of (float, float, float)
        Circles: middle and radius.
    words : tuple of Word
        Name and numbers.
    body : Box
        Room of the symbol without its words.

    Examples
    --------
    >>> draw_two("r1", "resistor", ("a", "b"), (0.0, 0.0), ("1 kohm",)).terminals["b"]
    ('b', (28.0, 0.0))
    """

    name: str
    terminals: dict[str, tuple[str, Point]]
    strokes: tuple[tuple[Point, ...], ...]
    solids: tuple[tuple[Point, ...], ...]
    rings: tuple[tuple[float, float, float], ...]
    words: tuple[Word, ...]
    body: Box

    @property
    def box(self) -> Box:
        """Room of the symbol and its words."""
        return Box.around([self.body, *(word.box for word in self.words)])


HALF = 20.0
"""From the middle of a transistor to its drain or source."""

REACH = 27.0
"""From its channel to the end of its gate."""

LEAD = 28.0
"""From the middle of a resistor or capacitor to its ends."""


def draw_transistor(
    name: str, nets: tuple[str, str, str], at: Point, *, face: int, channel: str, drain_up: bool,
    notes: Sequence[str] = (),
) -> Symbol:  # fmt: skip
    """Draw a transistor.

    Parameters
    ----------
    name : str
        Instance.
    nets : (str, str, str)
        Of drain, gate, source.
    at : (float, float)
        Middle of the line from drain to source.
    face : {-1, 1}
        Gate to the left, or to the right.
    channel : {"n", "p"}
        Sets the arrow, and a ring at the gate.
    drain_up : bool
        Whether the drain is above.
    notes : sequence of str
        Lines below the name.

    Returns
    -------
    Symbol
        With terminals ``d g s``.

    Examples
    --------
    >>> one = draw_transistor("m1", ("d", "g", "s"), (0, 0), face=-1, channel="n", drain_up=True)
    >>> one.terminals["g"]
    ('g', (-27.0, 0))
    """
    x, y = at
    up = -1 if drain_up else 1
    bar, gate = x + face * 9, x + face * 13.5
    start = gate + face * 5.5 if channel == "p" else gate
    strokes: tuple[tuple[Point, ...], ...] = (
        ((x, y - HALF), (x, y - 10), (bar, y - 10)),
        ((x, y + HALF), (x, y + 10), (bar, y + 10)),
        ((bar, y - 14), (bar, y + 14)),
        ((gate, y - 11), (gate, y + 11)),
        ((start, y), (x + face * REACH, y)),
    )
    source = y - up * 10
    tip, tail = (x + face * 1.0, x + face * 8) if channel == "n" else (bar, x + face * 2.0)
    solids: tuple[tuple[Point, ...], ...] = (
        ((tip, source), (tail, source - 3.2), (tail, source + 3.2)),
    )
    rings = ((gate + face * 2.75, y, 2.75),) if channel == "p" else ()
    drain, gate_net, source_net = nets
    terminals = {
        "d": (drain, (x, y + up * HALF)), "g": (gate_net, (x + face * REACH, y)),
        "s": (source_net, (x, y - up * HALF)),
    }  # fmt: skip
    words = stack_words((name, *notes), x - face * 7, y, "start" if face < 0 else "end")
    left, right = sorted((x, x + face * REACH))
    body = Box(left, y - HALF, right, y + HALF)
    return Symbol(name, terminals, strokes, solids, rings, words, body)


def draw_two(
    name: str, kind: str, nets: tuple[str, str], at: Point, notes: Sequence[str] = (), *,
    vertical: bool = False, flip: bool = False,
) -> Symbol:  # fmt: skip
    """Draw a resistor or a capacitor.

    Parameters
    ----------
    name : str
        Instance.
    kind : {"resistor", "capacitor"}
        What it is.
    nets : (str, str)
        Of its plus and minus ends.
    at : (float, float)
        Its middle.
    notes : sequence of str
        Lines below the name.
    vertical : bool
        Ends above and below, words to the right; name above and notes below otherwise.
    flip : bool
        Plus end at the right or below.

    Returns
    -------
    Symbol
        With terminals ``a b``.

    Examples
    --------
    >>> draw_two("c1", "capacitor", ("x", "0"), (0, 0), vertical=True).terminals["a"]
    ('x', (0, -28.0))
    """
    x, y = at

    def put(along: float, across: float) -> Point:
        return (x + across, y + along) if vertical else (x + along, y + across)

    if kind == "resistor":
        inner, across = 15.0, 5.0
        shapes: tuple[tuple[Point, ...], ...] = (
            (put(-15, -5), put(15, -5), put(15, 5), put(-15, 5), put(-15, -5)),
        )
    else:
        inner, across = 2.5, 9.0
        shapes = tuple((put(side, -9), put(side, 9)) for side in (-2.5, 2.5))
    leads = tuple((put(sign * inner, 0), put(sign * LEAD, 0)) for sign in (-1, 1))
    ends = (put(-LEAD, 0), put(LEAD, 0))
    first, second = reversed(ends) if flip else ends
    terminals = {"a": (nets[0], first), "b": (nets[1], second)}
    if vertical:
        words = stack_words((name, *notes), x + across + 5, y, "start")
        body = Box(x - across, y - LEAD, x + across, y + LEAD)
    else:
        offset = across + 7
        below = [Word(text, x, y + offset + k * _LINE, "middle", "note")
                 for k, text in enumerate(notes)]  # fmt: skip
        words = (Word(name, x, y - offset, "middle"), *below)
        body = Box(x - LEAD, y - across, x + LEAD, y + across)
    return Symbol(name, terminals, (*shapes, *leads), (), (), words, body)


def stack_words(texts: Sequence[str], x: float, y: float, anchor: str) -> tuple[Word, ...]:
    """Set lines below one another, the first as a name, around a height.

    Parameters
    ----------
    texts : sequence of str
        The lines.
    x, y : float
        Edge, and middle of all.
    anchor : str
        Which edge.

    Returns
    -------
    tuple of Word
        The lines.

    Examples
    --------
    >>> [word.y for word in stack_words(("a", "b", "c"), 0.0, 10.0, "start")]
    [-1.5, 10.0, 21.5]
    """
    first = y - _LINE * (len(texts) - 1) / 2
    return tuple(
        Word(text, x, first + k * _LINE, anchor, "note" if k else "name")
        for k, text in enumerate(texts)
    )
