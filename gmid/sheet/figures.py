"""How every figure looks: axes labelled from the nomenclature, readable in grey, the same bytes.

Figures are made without any window system.  Curves differ by line and marker as well as by
colour, and the colours by lightness, so that a grey copy can be read.  Nothing about the day or the
machine enters a file, so that the same data give the same bytes.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from io import BytesIO
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import UsageFault, advise
from gmid.nomenclature import find_quantity
from gmid.quantity import choose_prefix

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

FORMATS = ("svg", "pdf", "png")
"""Kinds of files that can be written; the first two are drawn in lines."""

COLOURS = ("#10324f", "#d2652d", "#1d6470", "#d9a02c", "#5b2f80", "#5aa06a", "#8a5a44", "#b9a0c8")
"""Neighbours differ in lightness, so that they stay apart in grey."""

MARKERS = ("o", "s", "^", "D", "v", "P", "X", "*")
DASHES: tuple[Any, ...] = (
    "-", (0, (5, 1.5)), (0, (1.2, 1.2)), (0, (6, 1.5, 1.2, 1.5)), (0, (9, 2)),
    (0, (6, 1.5, 1.2, 1.5, 1.2, 1.5)),
)  # fmt: skip

_PREFIXED = ("m", "A", "S", "F", "Hz")
_CUSTOMARY = {"A/m": ("uA/um", 0), "m": ("um", -6), "degC": ("C", 0)}
_LOOK: dict[Any, Any] = {
    "svg.fonttype": "path",
    "svg.hashsalt": "gmid",
    "pdf.fonttype": 42,
    "font.family": "DejaVu Sans",
    "font.size": 8.0,
    "mathtext.fontset": "dejavusans",
    "axes.linewidth": 0.7,
    "axes.edgecolor": "#404040",
    "axes.grid": True,
    "axes.axisbelow": True,
    "axes.titlesize": 9.0,
    "grid.color": "#dddddd",
    "grid.linewidth": 0.5,
    "lines.linewidth": 1.3,
    "lines.markersize": 4.0,
    "xtick.direction": "in",
    "ytick.direction": "in",
    "legend.frameon": False,
    "figure.facecolor": "white",
    "savefig.dpi": 150.0,
}


@dataclass(frozen=True)
class Style:
    """How one curve is drawn.

    Parameters
    ----------
    colour : str
        Line colour.
    dash : str or tuple
        Line pattern.
    marker : str
        Marker shape.

    Examples
    --------
    >>> choose_style(1, 0).marker
    's'
    """

    colour: str
    dash: Any
    marker: str

    @property
    def keywords(self) -> dict[str, Any]:
        """Arguments for drawing a line."""
        return {
            "color": self.colour, "linestyle": self.dash, "marker": self.marker,
            "markerfacecolor": "white", "markeredgewidth": 0.8,
        }  # fmt: skip


def choose_style(first: int, second: int | None = None) -> Style:
    """Choose colour, marker and dash of a curve.

    Parameters
    ----------
    first : int
        Place in the first family, which sets colour and marker; at most 8 can be told apart.
    second : int, optional
        Place in a second family, which sets the dash, of which there are 6; with one family
        alone the dash follows the colour.

    Returns
    -------
    Style
        The style.

    Examples
    --------
    >>> choose_style(0).dash, choose_style(3, 0).dash
    ('-', '-')
    """
    dash = first if second is None else second
    return Style(
        COLOURS[first % len(COLOURS)], DASHES[dash % len(DASHES)], MARKERS[first % len(MARKERS)]
    )


@contextmanager
def drawing() -> Iterator[None]:
    """Draw in the common style, whatever the user's own settings.

    Yields
    ------
    None
        Figures made and saved inside bear the style.

    Examples
    --------
    >>> with drawing():
    ...     figure = new_figure(100, 80)
    >>> [round(float(side), 2) for side in figure.get_size_inches()]
    [3.94, 3.15]
    """
    import matplotlib as mpl

    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(_LOOK)
        yield


def new_figure(width: float, height: float) -> Figure:
    """Make an empty figure that lays itself out.

    Parameters
    ----------
    width, height : float
        Size [mm].

    Returns
    -------
    Figure
        Without a window.

    Examples
    --------
    >>> new_figure(254, 254).axes
    []
    """
    from matplotlib.figure import Figure

    return Figure(figsize=(width / 25.4, height / 25.4), layout="constrained")


def save_figure(figure: Figure, kind: str) -> bytes:
    """Turn a figure into the bytes of a file; the same figure gives the same bytes.

    Parameters
    ----------
    figure : Figure
        The figure.
    kind : str
        One of `FORMATS`.

    Returns
    -------
    bytes
        What the file is to hold.

    Raises
    ------
    UsageFault
        If there is no such kind of file.

    Examples
    --------
    >>> with drawing():
    ...     save_figure(new_figure(50, 50), "svg")[:5]
    b'<?xml'
    """
    if kind not in FORMATS:
        raise UsageFault(f"a figure cannot be written as {kind!r}.", hint=advise(kind, FORMATS))
    stamps: Mapping[str, Mapping[str, Any]] = {
        "svg": {"Date": None, "Creator": None},
        "pdf": {"CreationDate": None, "Creator": None, "Producer": None},
        "png": {"Software": None},
    }
    buffer = BytesIO()
    figure.savefig(buffer, format=kind, metadata=dict(stamps[kind]))
    return buffer.getvalue()


def typeset(symbol: str) -> str:
    """Write a symbol of the nomenclature with italics and subscripts.

    Parameters
    ----------
    symbol : str
        Such as ``gm/ID``.

    Returns
    -------
    str
        For matplotlib's own typesetting.

    Examples
    --------
    >>> typeset("gm/ID"), typeset("L")
    ('$g_{m}$/$I_{D}$', '$L$')
    """
    return re.sub(
        r"([A-Za-z])([A-Za-z]*)",
        lambda found: f"${found[1]}_{{{found[2]}}}$" if found[2] else f"${found[1]}$",
        symbol,
    )


def scale_axis(
    name: str, values: Sequence[ArrayLike], *, per_width: bool = False
) -> tuple[str, float]:
    r"""Label an axis and find what its values are to be divided by.

    Parameters
    ----------
    name : str
        A quantity of the nomenclature.
    values : sequence of array_like
        All that the axis shows, in SI.
    per_width : bool, keyword-only
        Whether the values have been divided by the width [m].

    Returns
    -------
    label : str
        Symbol and unit with prefix.
    divisor : float
        Power of ten.

    Examples
    --------
    >>> scale_axis("ft", [[1e9, 5e9]])
    ('$f_{T}$ [GHz]', 1000000000.0)
    >>> scale_axis("cgg", [[1e-9]], per_width=True)
    ('$C_{gg}$/$W$ [fF/\xb5m]', 1e-09)
    """
    quantity = find_quantity(name)
    every = np.concatenate([np.ravel(np.asarray(part, dtype=np.float64)) for part in values])
    unit, power = _CUSTOMARY.get(quantity.unit, (quantity.unit or "-", 0))
    symbol = quantity.symbol
    if quantity.unit in _PREFIXED and quantity.unit != "m":
        finite = np.abs(every[np.isfinite(every)])
        top = np.max(finite, initial=0.0) * (1e-6 if per_width else 1.0)
        prefix, power = choose_prefix([float(top)])
        unit = prefix + unit
    if per_width:
        symbol, unit, power = f"{symbol}/W", f"{unit}/um", power + 6
    unit = re.sub(r"\bu(?=[A-Zm])", "\N{MICRO SIGN}", unit).replace("^2", "$^2$")
    return f"{typeset(symbol)} [{unit}]", float(f"1e{power}")


def draw_curve(
    axes: Axes, x: ArrayLike, y: ArrayLike, style: Style, *, label: str, markers: int = 6
) -> None:
    """Draw a curve with a few markers spread along it.

    Parameters
    ----------
    axes : Axes
        Where to draw.
    x, y : array_like, shape (n,)
        Points, in the units of the axes.
    style : Style
        Colour, dash and marker.
    label : str, keyword-only
        For the legend.
    markers : int, keyword-only
        About how many markers.

    Examples
    --------
    >>> with drawing():
    ...     axes = new_figure(80, 60).add_subplot()
    ...     draw_curve(axes, [0, 1], [1, 2], choose_style(0), label="L = 1 um")
    >>> axes.lines[0].get_label()
    'L = 1 um'
    """
    axes.plot(np.asarray(x), np.asarray(y), label=label, markevery=0.9 / markers, **style.keywords)
