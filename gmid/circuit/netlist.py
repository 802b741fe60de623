"""Plain SPICE text: element lines, subcircuits, and the pieces of a test bench.

Transistor lines come from the template of the device's recipe. Ground is ``0``.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence

import numpy as np

from gmid.circuit.elements import Element, Transistor, VoltageSource
from gmid.circuit.parts import Parts
from gmid.errors import DataFault, UnknownName, UsageFault, advise
from gmid.network.stamps import GROUND
from gmid.sweep.model import UnitTransistor

PLACES = ("name", "d", "g", "s", "b", "width", "length", "count")
"""What a template of a device line may hold in braces."""

_PLACE = re.compile(r"\{(\w*)\}")
_WIDEST = 100


def format_value(value: float) -> str:
    """Write a number for a netlist: short, and read back as the same number.

    Parameters
    ----------
    value : float
        Any number.

    Returns
    -------
    str
        Without a unit prefix.

    Examples
    --------
    >>> format_value(0.18e-6), format_value(4.0), format_value(2.5e5)
    ('1.8e-07', '4', '250000')
    """
    number = float(value)
    return str(int(number)) if number.is_integer() and abs(number) < 1e15 else repr(number)


def write_transistor(transistor: Transistor, unit: UnitTransistor) -> list[str]:
    """Write the lines of an instance, one for each unit of a stack.

    Parameters
    ----------
    transistor : Transistor
        With values of one item.
    unit : UnitTransistor
        Its device's unit, with the netlist template.

    Returns
    -------
    list of str
        Lines; the first letter of the instance's name is not doubled where it is that of the
        template, so that ``mtail`` of ``M{name}`` becomes ``Mtail``.

    Raises
    ------
    DataFault
        If there is no template, or it holds what is not known.
    UsageFault
        If the count is not whole, or values have leading axes.

    Examples
    --------
    >>> line = "M{name} {d} {g} {s} {b} n w={width} l={length} m={count}"
    >>> unit = UnitTransistor("n", 2e-6, netlist=line)
    >>> m1 = Transistor("m1", "nmos", "n", "out", "in", "0", "0", np.array(1e-6), np.array(4.0))
    >>> write_transistor(m1, unit)
    ['M1 out in 0 0 n w=2e-06 l=1e-06 m=4']
    """
    if unit.netlist is None:
        raise DataFault(
            f"{transistor.device} has no netlist template, so {transistor.name} cannot be written.",
            hint='Give netlist = "M{name} {d} {g} {s} {b} MODEL w={width} l={length} m={count}" '
            "in its recipe and import it again.",
        )
    count, length = _single(transistor, "count"), _single(transistor, "length")
    if not count.is_integer():
        raise UsageFault(
            f"the count of {transistor.name} is {count:g}; a netlist holds whole units only."
        )
    lines = []
    for part in transistor.units:
        values = {
            "name": part.name, "d": part.drain, "g": part.gate, "s": part.source, "b": part.bulk,
            "width": format_value(unit.width), "length": format_value(length),
            "count": format_value(count),
        }  # fmt: skip
        lines.append(_fill(unit.netlist, values, transistor.device))
    return lines


def _fill(template: str, values: dict[str, str], device: str) -> str:
    for place in _PLACE.findall(template):
        if place not in values:
            raise DataFault(
                f"the netlist template of {device} holds {{{place}}}.",
                hint=f"It may hold {' '.join(f'{{{name}}}' for name in PLACES)}.",
            )
    letter = template.lstrip()[:1]
    if letter.upper() not in ("M", "X") or "{name}" not in template:
        raise DataFault(
            f"the netlist template of {device} makes no transistor line: {template!r}.",
            hint="Begin it with M{name} or X{name}.",
        )
    name = values["name"]
    if name[0].lower() == letter.lower() and len(name) > 1:
        values = {**values, "name": name[1:]}
    return _PLACE.sub(lambda found: values[found[1]], template).strip()


def _single(element: Element, name: str) -> float:
    value = element.values[name]
    if np.size(value) != 1:
        raise UsageFault(
            f"the {name} of {element.name} has {np.size(value)} values; a netlist holds one.",
            hint="Take one item of the batch with Circuit.item.",
        )
    return float(np.reshape(value, ()))


def _named(letter: str, name: str) -> str:
    """Give a name the letter its kind of line begins with."""
    return name if name[0].lower() == letter else f"{letter}{name}"


def write_element(element: Element, units: Mapping[str, UnitTransistor]) -> list[str]:
    """Write the lines of any element.

    Parameters
    ----------
    element : Element
        With values of one item.
    units : mapping of str to UnitTransistor
        Units by device.

    Returns
    -------
    list of str
        Lines.

    Raises
    ------
    UnknownName
        If a device is missing.

    Examples
    --------
    >>> from gmid.circuit.elements import Resistor
    >>> write_element(Resistor("sense", "a", "b", np.array(4e5)), {})
    ['rsense a b 400000']
    """
    if isinstance(element, Transistor):
        if element.device not in units:
            raise UnknownName(
                f"{element.name}: there is no device {element.device}.",
                hint=advise(element.device, units),
            )
        return write_transistor(element, units[element.device])
    ((name, _),) = element.values.items()
    letter = {"resistance": "r", "capacitance": "c", "voltage": "v", "current": "i"}[name]
    level = format_value(_single(element, name))
    dc = "dc " if letter in "vi" else ""
    return [f"{_named(letter, element.name)} {' '.join(element.nodes)} {dc}{level}"]


def write_elements(circuit: Parts, units: Mapping[str, UnitTransistor]) -> list[str]:
    """Write the lines of a circuit's elements.

    Parameters
    ----------
    circuit : Circuit
        With values of one item.
    units : mapping of str to UnitTransistor
        Units by device.

    Returns
    -------
    list of str
        Lines, in the order of the elements.

    Raises
    ------
    UsageFault
        If two lines would have the same name.

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> c = Circuit()
    >>> c.add_voltage_source("vdd", "vdd", "0", 1.8)
    >>> c.add_capacitor("c1", "vdd", "0", 1e-12)
    >>> write_elements(c, {})
    ['vdd vdd 0 dc 1.8', 'c1 vdd 0 1e-12']
    """
    lines = [line for element in circuit.elements for line in write_element(element, units)]
    seen: dict[str, str] = {}
    for line in lines:
        name = line.split(maxsplit=1)[0].lower()
        if name in seen:
            raise UsageFault(
                f"two netlist lines would be named {name}: {seen[name]!r} and {line!r}."
            )
        seen[name] = line
    return lines


def write_subcircuit(
    circuit: Parts, name: str, ports: Sequence[str], units: Mapping[str, UnitTransistor]
) -> str:
    r"""Write a circuit of transistors, resistors and capacitors as a subcircuit.

    Parameters
    ----------
    circuit : Circuit
        With values of one item and no source.
    name : str
        Name of the subcircuit.
    ports : sequence of str
        Nodes of the circuit, in the order of the ports.
    units : mapping of str to UnitTransistor
        Units by device.

    Returns
    -------
    str
        Text from ``.subckt`` to ``.ends``, long lines continued.

    Raises
    ------
    UnknownName
        If a port or a device is missing.
    UsageFault
        If the circuit holds a source or the ground node, or values of several items.

    Examples
    --------
    >>> from gmid.circuit import Circuit
    >>> c = Circuit()
    >>> c.add_resistor("r1", "a", "b", 1e3)
    >>> print(write_subcircuit(c, "part", ["a", "b"], {}), end="")
    .subckt part a b
    r1 a b 1000
    .ends part
    """
    if re.fullmatch(r"[A-Za-z]\w*", name, re.ASCII) is None:
        raise UsageFault(
            f"{name!r} cannot name a subcircuit.", hint="Use letters, digits and _, a letter first."
        )
    for source in (*circuit.voltage_sources, *circuit.current_sources):
        raise UsageFault(
            f"{source.name} is a source; a subcircuit holds transistors, resistors and capacitors."
        )
    for port in ports:
        if port not in circuit.nodes:
            raise UnknownName(f"the circuit has no node {port}.", hint=advise(port, circuit.nodes))
    for element in circuit.elements:
        if GROUND in element.nodes:
            raise UsageFault(
                f"{element.name} lies at ground, which a subcircuit does not have as a port.",
                hint="Give the rail a node of its own, such as vss.",
            )
    lines = [f".subckt {name} {' '.join(ports)}", *write_elements(circuit, units), f".ends {name}"]
    return "".join(f"{wrap_line(line)}\n" for line in lines)


def wrap_line(line: str) -> str:
    r"""Break a long line into a line and its continuations.

    Parameters
    ----------
    line : str
        One line.

    Returns
    -------
    str
        Lines of at most 100 characters, the later ones beginning with ``+``.

    Examples
    --------
    >>> wrap_line("x1 " + "node " * 30).count("\n+ ")
    1
    """
    rows, row = [], ""
    for word in line.split():
        if row and len(row) + 1 + len(word) > _WIDEST:
            rows.append(row)
            row = f"+ {word}"
        else:
            row = f"{row} {word}" if row else word
    return "\n".join([*rows, row])


def write_deck(
    title: str,
    *,
    analysis: str,
    includes: Sequence[str] = (),
    parameters: Mapping[str, float] | None = None,
    lines: Sequence[str] = (),
) -> str:
    r"""Put a deck together: title, includes, parameters, lines, one analysis.

    Parameters
    ----------
    title : str
        First line.
    analysis : str, keyword-only
        Such as ``.ac dec 50 1 1e9``.
    includes : sequence of str, keyword-only
        Names of files, in their order.
    parameters : mapping of str to float, keyword-only
        One ``.param`` line each.
    lines : sequence of str, keyword-only
        Everything else.

    Returns
    -------
    str
        Text that ends with ``.end``.

    Raises
    ------
    UsageFault
        If the title has several lines, or there is not exactly one analysis.

    Examples
    --------
    >>> print(write_deck("divider", analysis=".op", parameters={"r": 1e3},
    ...                  lines=["v1 in 0 1", "r1 in out {r}", "r2 out 0 {r}"]), end="")
    * divider
    .param r=1000
    v1 in 0 1
    r1 in out {r}
    r2 out 0 {r}
    .op
    .end
    """
    kinds = {".op", ".dc", ".ac", ".noise", ".tran"}
    found = [line for line in (*lines, analysis) if kinds & set(line.lower().split()[:1])]
    if found != [analysis] or "\n" in title:
        raise UsageFault(
            f"a deck has one title line and one analysis line, not {', '.join(found) or 'none'}."
        )
    text = [f"* {title}"]
    text += [f".include {name}" for name in includes]
    text += [f".param {name}={format_value(value)}" for name, value in (parameters or {}).items()]
    text += [wrap_line(line) for line in lines]
    return "\n".join([*text, analysis, ".end"]) + "\n"


def write_source(source: VoltageSource, *, ac: float | None = None, wave: str | None = None) -> str:
    """Write a voltage source with a small-signal strength or a waveform.

    Parameters
    ----------
    source : VoltageSource
        With a value of one item.
    ac : float, keyword-only
        Small-signal strength [V].
    wave : str, keyword-only
        Such as ``pulse(0 1.8 0 10u)``.

    Returns
    -------
    str
        One line.

    Examples
    --------
    >>> write_source(VoltageSource("vid", "vip", "vin", np.array(0.0)), ac=1.0)
    'vid vip vin dc 0 ac 1'
    """
    (line,) = write_element(source, {})
    if ac is not None:
        line += f" ac {format_value(ac)}"
    return line if wave is None else f"{line} {wave}"
