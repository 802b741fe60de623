"""Demands on an amplifier: their keys, units, and how each is read and written."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Any

from gmid.amplifier.plan import Requirement
from gmid.documents import Capacitance, Model, Parsed, Resistance, Unit
from gmid.errors import DataFault, GmidError, UnknownName, advise, raise_faults
from gmid.quantity import format_quantity, parse_quantity


@dataclass(frozen=True)
class DemandKind:
    """One demand that a request or a plan may state.

    Parameters
    ----------
    name : str
        Key, and name of the check.
    unit : str
        SI unit.
    meaning : str
        One line.

    Examples
    --------
    >>> DEMANDS["gbw"].unit
    'Hz'
    """

    name: str
    unit: str
    meaning: str


DEMANDS = {
    kind.name: kind
    for kind in (
        DemandKind("dc_gain", "dB", "least differential gain at DC into the load"),
        DemandKind("gbw", "Hz", "least unity-gain frequency into the load"),
        DemandKind("phase_margin", "deg", "least phase margin of the gain into the load"),
        DemandKind("swing", "V", "least peak differential output swing"),
        DemandKind("input_noise", "V/rtHz", "largest input noise density at a frequency"),
        DemandKind("slew_rate", "V/s", "least differential slew rate"),
        DemandKind("gm_total", "S", "least short-circuit transconductance"),
        DemandKind("intrinsic_gain", "dB", "least gain that its own output conductance leaves"),
        DemandKind("excess_pole", "Hz", "least excess-phase pole"),
        DemandKind("output_current", "A", "least peak output current"),
        DemandKind("common_mode_gain", "dB", "largest common-mode gain from input to output"),
        DemandKind("offset", "V", "largest input offset, one sigma"),
        DemandKind("supply_current", "A", "largest supply current"),
    )
}
"""Every demand by name, in the order of a sheet."""


def read_demand(name: str, raw: object) -> Requirement:
    """Read one demand of a document.

    Parameters
    ----------
    name : str
        A key of `DEMANDS`.
    raw : object
        A value with unit; or a table with `value` (`density` for noise), `at` and `because`.

    Returns
    -------
    Requirement
        In SI.

    Raises
    ------
    GmidError
        If it cannot be read.

    Examples
    --------
    >>> read_demand("input_noise", {"density": "40 nV/rtHz", "at": "1 MHz"}).at
    1000000.0
    """
    is_noise = name == "input_noise"
    key = "density" if is_noise else "value"
    table: Mapping[str, Any] = raw if isinstance(raw, Mapping) else {key: raw}
    known = (key, "because", *(("at",) if is_noise else ()))
    faults: list[GmidError] = [
        UnknownName(f"{word!r} is not a known key of {name}.", hint=advise(word, known))
        for word in table
        if word not in known
    ]
    needed = (key, "at") if is_noise else (key,)
    faults += [DataFault(f"{name} lacks {word}.") for word in needed if word not in table]
    raise_faults(faults)
    value = Unit(DEMANDS[name].unit).read(table[key])
    if DEMANDS[name].unit not in ("dB", "deg") and value <= 0:
        raise DataFault(f"{name} must be positive.")
    at = Unit("Hz", above=0.0).read(table["at"]) if is_noise else None
    return Requirement(value, at, str(table.get("because", "asked for")))


def _reader(name: str) -> Any:
    return Annotated[Requirement | None, Parsed(lambda raw: read_demand(name, raw))]


class DemandKeys(Model):
    """``[demands]`` and ``[plan.demands]``."""

    load_capacitance: Capacitance | None = None
    load_resistance: Resistance | None = None
    dc_gain: _reader("dc_gain") = None  # type: ignore[valid-type]
    gbw: _reader("gbw") = None  # type: ignore[valid-type]
    phase_margin: _reader("phase_margin") = None  # type: ignore[valid-type]
    swing: _reader("swing") = None  # type: ignore[valid-type]
    input_noise: _reader("input_noise") = None  # type: ignore[valid-type]
    slew_rate: _reader("slew_rate") = None  # type: ignore[valid-type]
    gm_total: _reader("gm_total") = None  # type: ignore[valid-type]
    intrinsic_gain: _reader("intrinsic_gain") = None  # type: ignore[valid-type]
    excess_pole: _reader("excess_pole") = None  # type: ignore[valid-type]
    output_current: _reader("output_current") = None  # type: ignore[valid-type]
    common_mode_gain: _reader("common_mode_gain") = None  # type: ignore[valid-type]
    offset: _reader("offset") = None  # type: ignore[valid-type]
    supply_current: _reader("supply_current") = None  # type: ignore[valid-type]


def collect_demands(keys: DemandKeys | None) -> dict[str, Requirement]:
    """List the demands that a document states.

    Parameters
    ----------
    keys : DemandKeys or None
        As read.

    Returns
    -------
    dict of str to Requirement
        In the order of `DEMANDS`.

    Examples
    --------
    >>> list(collect_demands(DemandKeys(gbw="20 MHz", dc_gain="60 dB")))
    ['dc_gain', 'gbw']
    """
    if keys is None:
        return {}
    stated = {name: getattr(keys, name) for name in DEMANDS}
    return {name: demand for name, demand in stated.items() if demand is not None}


def spell_demand(name: str, demand: Requirement) -> str | dict[str, str]:
    """Write a demand as a document states it.

    Parameters
    ----------
    name : str
        A key of `DEMANDS`.
    demand : Requirement
        In SI.

    Returns
    -------
    str or dict
        Reads back as the same demand.

    Examples
    --------
    >>> spell_demand("gbw", Requirement(20e6))
    '20 MHz'
    """
    value = spell(demand.value, DEMANDS[name].unit)
    key = "density" if name == "input_noise" else "value"
    table = {key: value}
    if demand.at is not None:
        table["at"] = spell(demand.at, "Hz")
    if demand.because != "asked for":
        table["because"] = demand.because
    return value if list(table) == ["value"] else table


def spell(value: float, unit: str) -> str:
    """Write a number with its unit so that it reads back as the same number.

    Parameters
    ----------
    value : float
        In SI.
    unit : str
        Its unit.

    Returns
    -------
    str
        As short as it can be.

    Examples
    --------
    >>> spell(4e-7, "m"), spell(1.2345678e-12, "F"), spell(0.00014382442956413955, "m")
    ('400 nm', '1.2345678 pF', '0.00014382442956413955')
    """
    for digits in (4, 6, 9, 12, 15, 17):
        text = format_quantity(value, unit, digits=digits)
        if parse_quantity(text, unit) == value:
            return text
    # a bare "m" after a number is refused; the number alone is in metres
    return repr(value) if unit == "m" else f"{value!r} {unit}".strip()
