"""Schematics: all of the circuit and nothing twice, nothing on top of anything, the right wires."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree
from dataclasses import replace
from itertools import combinations

import pytest

from gmid.amplifier.topology import PORTS, build_core
from gmid.circuit.circuit import Circuit
from gmid.circuit.elements import Transistor
from gmid.sheet.drawing import Box, Wire, Word
from gmid.sheet.panel import RAILS, Panel
from gmid.sheet.schematic import Placed, draw_schematic, lay_out_schematic
from sheet_plans import FORMS, make_form

SVG = "{http://www.w3.org/2000/svg}"
every_form = pytest.mark.parametrize("form", FORMS, ids=" ".join)
every_stack = pytest.mark.parametrize("stack", [1, 2])


def _instances(text: str) -> list[ElementTree.Element]:
    return [one for one in ElementTree.fromstring(text).iter(f"{SVG}g")
            if one.get("class") == "instance"]  # fmt: skip


@every_form
def test_every_element_is_drawn_once_with_its_numbers(form: tuple[str, str, str]) -> None:
    plan = replace(make_form(*form, stack=2), multiple=3)
    drawn = _instances(draw_schematic(plan))
    circuit = build_core(plan)
    assert sorted(one.get("data-name") for one in drawn) == sorted(e.name for e in circuit.elements)
    for one in drawn:
        element = circuit.find(one.get("data-name"))
        lines = [text.text for text in one.iter(f"{SVG}text")]
        assert lines[0] == element.name
        if isinstance(element, Transistor):
            place = plan.transistors[element.role]
            assert f"{3 * place.count} units" in lines
            assert f"L {place.length * 1e6:.4g} um" in lines
            assert "2 stacked" in lines
            tied = place.bulk == "source" and element.source not in RAILS
            assert ("own well" in lines) == tied
        else:
            assert lines[1].endswith(("ohm", "F"))


@every_stack
@every_form
def test_nothing_overlaps(form: tuple[str, str, str], stack: int) -> None:
    placed = lay_out_schematic(build_core(make_form(*form, stack=stack)))
    for one, other in combinations(placed, 2):
        assert not one.box.overlaps(other.box), (one.panel.title, other.panel.title)
    for panel in (one.panel for one in placed):
        rooms = [(name, symbol.box) for name, symbol in panel.symbols.items()]
        rooms += [(word.text, word.box) for word in panel.words]
        for (one_name, one_box), (other_name, other_box) in combinations(rooms, 2):
            assert not one_box.overlaps(other_box), (one_name, other_name)


@every_stack
@every_form
def test_wires_cross_no_symbol_and_no_word(form: tuple[str, str, str], stack: int) -> None:
    for panel in _panels(build_core(make_form(*form, stack=stack))):
        solid = [symbol.body for symbol in panel.symbols.values()]
        solid += [word.box for symbol in panel.symbols.values() for word in symbol.words]
        solid += [word.box for word in panel.words]
        for wire in (*panel.wires, *panel.drawn_rails):
            for box in solid:
                assert not _crosses(wire, box), (wire, box)


@every_form
def test_wires_and_names_make_the_nets_of_the_circuit(form: tuple[str, str, str]) -> None:
    circuit = build_core(make_form(*form))
    drawn = _trace_nets(_panels(circuit))
    wanted: dict[str, set[str]] = {}
    for element in circuit.elements:
        keys = "dgs" if isinstance(element, Transistor) else "ab"
        for key, net in zip(keys, element.nodes, strict=False):
            wanted.setdefault(net, set()).add(f"{element.name}.{key}")
    assert drawn == sorted(map(sorted, wanted.values()))


@every_form
def test_every_port_is_named_and_ringed_once(form: tuple[str, str, str]) -> None:
    panels = _panels(build_core(make_form(*form)))
    names = {word.text for panel in panels for word in panel.words}
    assert set(PORTS) - set(RAILS) <= names
    assert sum(len(panel.rings) for panel in panels) == len(set(PORTS) - set(RAILS))


@every_form
def test_the_signal_path_is_symmetric(form: tuple[str, str, str]) -> None:
    panel = _panels(build_core(make_form(*form)))[0]
    axis = panel.symbols["tail"].terminals["d"][1][0]
    for name, symbol in panel.symbols.items():
        if name.endswith("_p") and not name.startswith(("copy", "turn")):
            other = panel.symbols[f"{name[:-2]}_n"]
            for key, (_, (x, y)) in symbol.terminals.items():
                x2, y2 = other.terminals[key][1]
                assert (x - axis, y) == (axis - x2, y2), name


def test_a_p_input_stands_upside_down_with_its_words_upright() -> None:
    upright, turned = (_panels(build_core(make_form(x, "plain", "pairs")))[0] for x in "np")
    for name, symbol in upright.symbols.items():
        other = turned.symbols[name]
        for key, (_, (x, y)) in symbol.terminals.items():
            assert other.terminals[key][1] == (x, -y), name
        heights = [word.y for word in other.words]
        assert heights == sorted(heights)


def test_an_element_without_a_place_is_drawn_with_the_names_of_its_nets() -> None:
    circuit = build_core(make_form("n", "plain", "resistors"))
    circuit.add_capacitor("cextra", "vop", "tail", 1e-15)
    circuit.add_transistor("mextra", "nmos", polarity="n", drain="von", gate="vip", source="vss",
                           bulk="vss", length=1e-6, count=2)  # fmt: skip
    last = _panels(circuit)[-1]
    assert last.title == "Others"
    assert sorted(last.symbols) == ["cextra", "mextra"]
    nets = _trace_nets(_panels(circuit))
    assert any({"cextra.a", "direct_p.d"} <= set(net) for net in nets)
    assert any({"mextra.g", "pair_p.g"} <= set(net) for net in nets)


def test_the_same_plan_gives_the_same_text_in_black_and_white() -> None:
    plan = make_form("p", "cascoded", "pairs")
    text = draw_schematic(plan)
    assert text == draw_schematic(plan)
    root = ElementTree.fromstring(text)
    colours = {one.get(key) for one in root.iter() for key in ("fill", "stroke")}
    assert colours <= {None, "none", "#111", "#333", "#fff"}
    sizes = {float(one.get("font-size", 99)) for one in root.iter(f"{SVG}text")}
    assert min(sizes) >= 9
    assert float(root.get("width", 0)) <= 1040


def test_boxes_of_words_and_of_a_panel_hold_what_is_in_them() -> None:
    assert Word("ab", 10.0, 0.0, "end").box.right == 10.0
    panel = _panels(build_core(make_form("n", "plain", "followers")))[0]
    for symbol in panel.symbols.values():
        assert Box.around([panel.box, symbol.box]) == panel.box


def _panels(circuit: Circuit) -> list[Panel]:
    placed: tuple[Placed, ...] = lay_out_schematic(circuit)
    return [one.panel for one in placed]


def _crosses(wire: Wire, box: Box) -> bool:
    """Whether a wire goes through the inside of a box."""
    return wire.box.overlaps(box)


def _trace_nets(panels: list[Panel]) -> list[list[str]]:
    """Find which terminals hang together, by geometry and by names alone."""
    parent: dict[str, str] = {}

    def find(key: str) -> str:
        while parent.setdefault(key, key) != key:
            key = parent[key]
        return key

    terminals = []
    for number, panel in enumerate(panels):
        wires = [*panel.wires, *panel.drawn_rails]
        for index, wire in enumerate(wires):
            key = f"wire {number} {index}"
            for other, second in enumerate(wires):
                ends = (second.start, second.end)
                if other != index and any(wire.holds(point) for point in ends):
                    parent[find(key)] = find(f"wire {number} {other}")
        for name, symbol in panel.symbols.items():
            for terminal, (_, point) in symbol.terminals.items():
                terminals.append(f"{name}.{terminal}")
                for index, wire in enumerate(wires):
                    if wire.holds(point):
                        parent[find(f"{name}.{terminal}")] = find(f"wire {number} {index}")
        for rail, net in zip(wires[len(panel.wires) :], RAILS, strict=False):
            index = wires.index(rail)
            parent[find(f"wire {number} {index}")] = find(f"net {net}")
        for word in panel.words:
            nearest = min(range(len(wires)), key=lambda k: _distance(wires[k], word))
            assert _distance(wires[nearest], word) < 12, word
            parent[find(f"wire {number} {nearest}")] = find(f"net {word.text}")
    nets: dict[str, list[str]] = {}
    for terminal in terminals:
        nets.setdefault(find(terminal), []).append(terminal)
    return sorted(map(sorted, nets.values()))


def _distance(wire: Wire, word: Word) -> float:
    box = wire.box
    across = max(box.left - word.x, word.x - box.right, 0.0)
    down = max(box.top - word.y, word.y - box.bottom, 0.0)
    return (across**2 + down**2) ** 0.5
