"""Where the instances of the amplifier stand on its schematic, panel by panel.

Coordinates are for an n-channel input pair: x from the axis of symmetry, y from the upper rail
down. Which nets a terminal belongs to is read from the circuit; what is not joined here is named.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from gmid.circuit.elements import Element
from gmid.sheet.panel import Panel

_EDGE = 46.0
_STEP = 78.0
_OUTWARD = {-1: "left", 1: "right"}
_SIDES = (("p", "n", -1), ("n", "p", 1))
_PAIR, _CONTROL, _OUT, _TURN = 62.0, 160.0, 294.0, 416.0


def fill_panels(
    elements: Mapping[str, Element], channel: str, ports: set[str]
) -> Iterator[list[Panel]]:
    """Place every element, in rows of panels that belong together.

    Parameters
    ----------
    elements : mapping of str to Element
        All of an amplifier, by name.
    channel : {"n", "p"}
        Of its input pair.
    ports : set of str
        Its ports; those that were drawn are taken out.

    Yields
    ------
    list of Panel
        The signal path; then sensing and error amplifier; then the bias branch, and what is built
        in at the outputs; last what has no place of its own.

    Examples
    --------
    >>> from gmid.amplifier.example import example_plan
    >>> from gmid.amplifier.topology import build_core
    >>> elements = {one.name: one for one in build_core(example_plan()).elements}
    >>> [[panel.title for panel in row] for row in fill_panels(elements, "n", set())]
    [['Signal path'], ['Common-mode sensing', 'Error amplifier'], ['Bias']]
    """

    def start(title: str, height: float = 0.0) -> Panel:
        return Panel(title, elements, channel, ports, height)

    def close(*panels: Panel) -> list[Panel]:
        for panel in panels:
            panel.finish()
        return [panel for panel in panels if panel.symbols]

    levels = 4 if "direct_cascode_p" in elements else 3
    bias = start("Bias", 2 * _EDGE + 110)
    _place_bias(bias)
    ballast = start("At the outputs", 2 * _EDGE + 60)
    _place_output_capacitors(ballast)
    last = close(bias, ballast)
    signal = start("Signal path", 2 * _EDGE + _STEP * (levels - 1))
    _place_signal(signal, levels)
    rows = [close(signal)]
    if "sense_tail_p" in elements:
        both = start("Common-mode sensing and error amplifier", 2 * _EDGE + _STEP + 120)
        _place_pairs(both)
        rows.append(close(both))
    else:
        followed = "follower_p" in elements
        sense = start("Common-mode sensing", 246.0 if followed else 0.0)
        (_place_followers if followed else _place_resistors)(sense)
        error = start("Error amplifier", 2 * _EDGE + _STEP + 100)
        _place_error(error)
        rows.append(close(sense, error))
    rows.append(last)
    placed = {name for row in rows for panel in row for name in panel.symbols}
    others = [name for name in elements if name not in placed]
    if others:
        rest = start("Others", 2 * _EDGE + 60)
        for index, name in enumerate(others):
            rest.put(name, 220.0 * index, _EDGE + 30, vertical=True)
        rows.append(close(rest))
    yield from rows


def _place_signal(panel: Panel, levels: int) -> None:
    y = [_EDGE + _STEP * k for k in range(levels)]
    low, cascoded = y[-1], levels == 4
    middle = (y[1] + y[-2]) / 2
    panel.put("tail", 0, low)
    for side, far, sign in _SIDES:
        inward, outward = -sign, sign
        panel.put(f"load_{side}", sign * _PAIR, y[0], face=outward)
        panel.put(f"pair_{side}", sign * _PAIR, middle, face=outward)
        panel.put(f"direct_{side}", sign * _OUT, y[0], face=inward)
        panel.put(f"copy_{far}", sign * _TURN, y[0], face=outward)
        panel.put(f"turn_{side}", sign * _TURN, low, face=inward)
        panel.put(f"opposite_{side}", sign * _OUT, low, face=outward)
        panel.put(f"control_{side}", sign * _CONTROL, low, face=inward)
        if cascoded:
            panel.put(f"direct_cascode_{side}", sign * _OUT, y[1], face=inward)
            panel.put(f"opposite_cascode_{side}", sign * _OUT, y[2], face=inward)
        load, turn, opposite = f"load_{side}", f"turn_{side}", f"opposite_{side}"
        between = sign * (_PAIR + _OUT) / 2
        panel.join(y[0], f"{load}.g", f"direct_{side}.g", above=between)
        panel.join(y[0] + 29, f"{load}.d", f"{load}.g", f"pair_{side}.d")
        panel.join(low, f"{turn}.g", f"{opposite}.g", above=sign * (_OUT + _TURN) / 2)
        panel.join(low - 28, f"copy_{far}.d", f"{turn}.d", f"{turn}.g")
        _join_output(panel, side, sign, y, low - 28)
    panel.join(low - 32, "pair_p.s", "pair_n.s", "tail.d", above=0)


def _join_output(panel: Panel, side: str, sign: int, y: list[float], below: float) -> None:
    """Join the branch of an output, which is led towards the middle."""
    direct, opposite, control = f"direct_{side}.d", f"opposite_{side}.d", f"control_{side}.d"
    lead = _OUTWARD[-sign]
    if len(y) == 3:
        port = {lead: sign * (_CONTROL - 20)}
        panel.join(below, direct, opposite, control, **port)
        return
    upper, lower = f"direct_cascode_{side}", f"opposite_cascode_{side}"
    panel.join((y[0] + y[1]) / 2, direct, f"{upper}.s")
    panel.join((y[1] + y[2]) / 2, f"{upper}.d", f"{lower}.d", **{lead: sign * (_OUT - 30)})
    panel.join(below, f"{lower}.s", opposite, control, above=sign * (_OUT + _CONTROL) / 2)


def _place_resistors(panel: Panel) -> None:
    for side, _, sign in _SIDES:
        panel.put(f"rsense_{side}", sign * 62, 60, face=sign)
        panel.put(f"csense_{side}", sign * 62, 106, face=sign)
        ends = (f"rsense_{side}.a", f"csense_{side}.a")
        panel.join(60, *ends, **{_OUTWARD[sign]: sign * 105})
    panel.join(60, *(f"{kind}sense_{side}.b" for side in "pn" for kind in "rc"), above=0)


def _place_followers(panel: Panel) -> None:
    high, wire, low = _EDGE, 100.0, 200.0
    for side, x, face in (("p", -124.0, -1), ("n", 124.0, 1), ("m", 256.0, -1)):
        panel.put(f"follower_{side}", x, high, face=face)
        panel.put(f"follower_tail_{side}", x, low, face=face)
    for side, _, sign in _SIDES:
        resistor, capacitor = f"rsense_{side}", f"csense_{side}"
        panel.put(resistor, sign * 62, wire, face=sign)
        panel.put(capacitor, sign * 62, wire + 44, face=sign)
        ends = (f"follower_{side}.s", f"follower_tail_{side}.d", f"{resistor}.a", f"{capacitor}.a")
        panel.join(wire, *ends, **{_OUTWARD[sign]: sign * 139})
    panel.join(wire, *(f"{kind}sense_{side}.b" for side in "pn" for kind in "rc"), above=0)
    panel.join(wire, "follower_m.s", "follower_tail_m.d", right=271)


def _place_error(panel: Panel) -> None:
    top, pair, low = _EDGE, _EDGE + _STEP, _EDGE + _STEP + 100
    panel.put("error_tail", 0, top)
    for side, sign in (("s", -1), ("m", 1)):
        panel.put(f"error_pair_{side}", sign * 88, pair, face=sign)
        panel.put(f"error_load_{side}", sign * 88, low, face=-sign)
    panel.join(top + 32, "error_tail.d", "error_pair_s.s", "error_pair_m.s", above=-57)
    panel.join(low, "error_load_s.g", "error_load_m.g", above=0)
    panel.join(low - 28, "error_pair_s.d", "error_load_s.d", "error_load_s.g")
    _place_compensation(panel, low - 48, ("error_pair_m.d", "error_load_m.d"), 88)


def _place_compensation(panel: Panel, y: float, ends: tuple[str, ...], x: float) -> None:
    """Put resistor and capacitor at the right of `cm_drive`."""
    panel.put("rerror", x + 92, y)
    panel.put("cerror", x + 132, y + 34, vertical=True)
    panel.join(y, *ends, "rerror.a", above=x + 32)
    panel.join(y, "rerror.b", "cerror.a")


def _place_pairs(panel: Panel) -> None:
    top, pair, low = _EDGE, _EDGE + _STEP, _EDGE + _STEP + 120
    for side, _, sign in _SIDES:
        tail, outer, inner = f"sense_tail_{side}", f"sense_pair_{side}", f"sense_pair_{side}m"
        panel.put(tail, sign * 184, top, face=sign)
        panel.put(outer, sign * 272, pair, face=sign)
        panel.put(inner, sign * 92, pair, face=-sign)
        panel.join(top + 32, f"{tail}.d", f"{outer}.s", f"{inner}.s")
    panel.put("error_load_s", -272, low, face=1)
    panel.put("error_load_m", -92, low, face=-1)
    drains = ("sense_pair_p.d", "sense_pair_n.d", "error_load_s.d")
    panel.join(pair + 36, *drains, above=0)
    panel.join(low - 28, "error_load_s.d", "error_load_s.g")
    panel.join(low, "error_load_s.g", "error_load_m.g")
    drains = ("sense_pair_pm.d", "sense_pair_nm.d", "error_load_m.d")
    _place_compensation(panel, low - 48, drains, 92)


def _place_output_capacitors(panel: Panel) -> None:
    for name, x in (("cout_p", 0.0), ("cout_n", 140.0)):
        if name in panel.elements:
            panel.put(name, x, _EDGE + 30, vertical=True)


def _place_bias(panel: Panel) -> None:
    top, low = _EDGE, _EDGE + 110
    panel.put("bias_reference", 0, low, face=1)
    panel.put("bias_mirror", 100, low)
    panel.put("bias_load", 100, top)
    panel.join(low, "bias_reference.g", "bias_mirror.g")
    panel.join(low - 36, "bias_reference.d", "bias_reference.g", left=-20)
    panel.join(top + 29, "bias_load.d", "bias_load.g", "bias_mirror.d", left=62)
    if "bias_direct" not in panel.elements:
        return
    panel.put("bias_direct_feed", 258, low)
    panel.put("bias_direct", 258, top)
    panel.join(top + 29, "bias_direct.g", "bias_direct.d", "bias_direct_feed.d", left=222)
    panel.put("bias_opposite_feed", 484, top)
    panel.put("bias_opposite", 484, low)
    panel.join(low - 29, "bias_opposite.d", "bias_opposite.g", "bias_opposite_feed.d", left=448)
