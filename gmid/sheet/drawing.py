"""Pieces of a drawing: words, wires and the boxes they take, and the SVG of them; y downwards."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from html import escape

Point = tuple[float, float]

NAME_SIZE, NOTE_SIZE, NET_SIZE, TITLE_SIZE = 10.5, 9.5, 9.5, 11.0
"""Sizes of letters: names of instances, their numbers, names of nets, titles."""

_LETTER = 0.6


@dataclass(frozen=True)
class Box:
    """A rectangle that something takes up.

    Parameters
    ----------
    left, top, right, bottom : float
        Its edges, y downwards.

    Examples
    --------
    >>> Box(0, 0, 2, 2).overlaps(Box(1, 1, 3, 3)), Box(0, 0, 1, 1).overlaps(Box(1, 0, 2, 1))
    (True, False)
    """

    left: float
    top: float
    right: float
    bottom: float

    def overlaps(self, other: Box) -> bool:
        """Tell whether two boxes share more than an edge.

        Parameters
        ----------
        other : Box
            The other one.

        Returns
        -------
        bool
            Whether they do.
        """
        return (
            self.left < other.right and other.left < self.right
            and self.top < other.bottom and other.top < self.bottom
        )  # fmt: skip

    @staticmethod
    def around(boxes: Iterable[Box]) -> Box:
        """Give the smallest box around others.

        Parameters
        ----------
        boxes : iterable of Box
            At least one.

        Returns
        -------
        Box
            Around all.
        """
        every = list(boxes)
        return Box(
            min(one.left for one in every), min(one.top for one in every),
            max(one.right for one in every), max(one.bottom for one in every),
        )  # fmt: skip


@dataclass(frozen=True)
class Word:
    """A line of text; `y` is its middle.

    Parameters
    ----------
    text : str
        What it says.
    x, y : float
        Where.
    anchor : {"start", "middle", "end"}
        Which part of it is at `x`.
    kind : {"name", "note", "net", "title"}
        What it is.

    Examples
    --------
    >>> Word("vop", 0.0, 0.0, "start", "net").box.right > 10
    True
    """

    text: str
    x: float
    y: float
    anchor: str = "start"
    kind: str = "name"

    @property
    def size(self) -> float:
        """Size of its letters."""
        sizes = {"name": NAME_SIZE, "note": NOTE_SIZE, "net": NET_SIZE, "title": TITLE_SIZE}
        return sizes[self.kind]

    @property
    def box(self) -> Box:
        """Room it takes, by the width of wide letters."""
        width = _LETTER * self.size * len(self.text)
        left = self.x - width * {"start": 0.0, "middle": 0.5, "end": 1.0}[self.anchor]
        return Box(left, self.y - self.size / 2, left + width, self.y + self.size / 2)


@dataclass(frozen=True)
class Wire:
    """A drawn piece of a net.

    Parameters
    ----------
    net : str
        Its name.
    start, end : (float, float)
        Ends of a straight line.

    Examples
    --------
    >>> Wire("vop", (0.0, 0.0), (10.0, 0.0)).holds((5.0, 0.0))
    True
    """

    net: str
    start: Point
    end: Point

    def holds(self, point: Point) -> bool:
        """Tell whether a point lies on it, its ends included.

        Parameters
        ----------
        point : (float, float)
            The point.

        Returns
        -------
        bool
            Whether it does.
        """
        (x, y), (x1, y1), (x2, y2) = point, self.start, self.end
        near = 1e-6
        return (
            min(x1, x2) - near <= x <= max(x1, x2) + near
            and min(y1, y2) - near <= y <= max(y1, y2) + near
        )

    @property
    def box(self) -> Box:
        """The line as a box without area."""
        (x1, y1), (x2, y2) = self.start, self.end
        return Box(min(x1, x2), min(y1, y2), max(x1, x2), max(y1, y2))


def write_path(points: Sequence[Point], *, close: bool = False) -> str:
    """Write points as the path of an SVG.

    Parameters
    ----------
    points : sequence of (float, float)
        In order.
    close : bool
        Go back to the first.

    Returns
    -------
    str
        The commands.

    Examples
    --------
    >>> write_path([(0.0, 1.0), (2.5, 1.0)])
    'M0 1L2.5 1'
    """
    body = "L".join(f"{x:.6g} {y:.6g}" for x, y in points)
    return f"M{body}{'Z' if close else ''}"


def write_word(word: Word) -> str:
    """Write a word as SVG text.

    Parameters
    ----------
    word : Word
        The word.

    Returns
    -------
    str
        The element; its letters stand on a line a third of their size below the middle.

    Examples
    --------
    >>> write_word(Word("a<b", 1.0, 2.0, "end", "net"))
    '<text x="1" y="5.325" font-size="9.5" text-anchor="end" font-style="italic">a&lt;b</text>'
    """
    looks = {"name": "", "note": ' fill="#333"', "net": ' font-style="italic"',
             "title": ' font-weight="bold"'}  # fmt: skip
    anchor = f' text-anchor="{word.anchor}"' if word.anchor != "start" else ""
    return (
        f'<text x="{word.x:.6g}" y="{word.y + 0.35 * word.size:.6g}" '
        f'font-size="{word.size:g}"{anchor}{looks[word.kind]}>{escape(word.text)}</text>'
    )
