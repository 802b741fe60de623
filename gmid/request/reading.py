"""Reads a request file."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, TypeVar

from gmid.amplifier.places import PLACES
from gmid.amplifier.plan import Choices, Level, Matching, Supply
from gmid.documents import Document, parse_document, read_document
from gmid.documents.fields import Level as LevelKeys
from gmid.errors import DataFault, Faults, GmidError, UnknownName, advise, raise_faults
from gmid.filters.passives import Passives
from gmid.filters.sections import Section
from gmid.filters.spec import FilterSpec, Tolerance
from gmid.request.keys import AmplifierKeys, FilterKeys, RequestKeys, SupplyKeys
from gmid.request.process import Process
from gmid.request.request import Request
from gmid.request.requirements import collect_demands

T = TypeVar("T")

_IN_DB = ("ripple", "attenuation", "gain", "snr", "distortion")


def read_request(path: str | Path) -> Request:
    """Read a request file.

    Parameters
    ----------
    path : str or Path
        The file; the table is found relative to it.

    Returns
    -------
    Request
        Checked as far as the file alone allows.

    Raises
    ------
    GmidError
        Every fault of the file, each with line and key.

    Examples
    --------
    >>> read_request("missing.toml")
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.toml: there is no such file.
    """
    return build_request(read_document(path, RequestKeys))


def parse_request(text: str, *, name: str = "request", path: Path | None = None) -> Request:
    """Read the text of a request.

    Parameters
    ----------
    text : str
        TOML.
    name : str
        Name for messages.
    path : Path, optional
        File it stands for, for paths relative to it.

    Returns
    -------
    Request
        As `read_request`.

    Examples
    --------
    >>> from gmid.request.request import EXAMPLE
    >>> parse_request(EXAMPLE).supply.voltage
    1.8
    """
    return build_request(parse_document(text, RequestKeys, name=name, path=path))


def build_request(document: Document[Any], *, needs_goal: bool = True) -> Request:
    """Turn the keys of a request or a plan into the request.

    Parameters
    ----------
    document : Document
        With the tables of a request.
    needs_goal : bool
        Whether a filter or demands must be there, as a plan's need not.

    Returns
    -------
    Request
        The request.

    Raises
    ------
    GmidError
        Every fault, with line and key.

    Examples
    --------
    >>> from gmid.request.request import EXAMPLE
    >>> build_request(parse_document(EXAMPLE, RequestKeys)).title
    'An amplifier'
    """
    keys = document.model
    faults: list[GmidError] = _check_tables(document, needs_goal)
    spec = tolerance = None
    passives = Passives()
    if keys.filter is not None:
        with _placed(document, faults):
            spec = _read_filter(keys.filter)
        with _placed(document, faults):
            tolerance = _read_tolerance(keys)
    with _placed(document, faults):
        passives = Passives(**_plain(keys.passives))
    choices = Choices()
    with _placed(document, faults, "amplifier"):
        choices = _read_choices(keys.amplifier)
    raise_faults(faults)
    demands = keys.demands
    return Request(
        title=keys.title,
        process=_read_process(document),
        supply=_read_supply(keys.supply),
        choices=choices,
        matching={name: Matching(one.avt, one.abeta) for name, one in keys.matching.items()},
        demands=collect_demands(demands),
        spec=spec,
        tolerance=tolerance,
        passives=passives,
        load_capacitance=(demands and demands.load_capacitance) or 0.0,
        load_resistance=(demands and demands.load_resistance) or float("inf"),
        name=document.name,
        data=document.data,
    )


def _check_tables(document: Document[Any], needs_goal: bool) -> list[GmidError]:
    keys = document.model
    faults: list[GmidError] = []
    if needs_goal and (keys.filter is None) == (keys.demands is None):
        found = "both" if keys.filter else "neither"
        faults.append(DataFault(
            f"a request has either [filter] or [demands]; this one has {found}.",
            where=document.where("demands") if keys.filter else document.name,
        ))  # fmt: skip
    if needs_goal and keys.demands is not None:
        if keys.demands.load_capacitance is None:
            faults.append(document.fault(
                "lacks load_capacitance.", "demands", hint="Say what each output drives.",
            ))  # fmt: skip
        if not collect_demands(keys.demands):
            faults.append(document.fault("asks for nothing.", "demands", hint="Give gbw at least."))
    if keys.filter is not None and keys.tolerance is None:
        faults.append(document.fault(
            "needs [tolerance] beside it.", "filter",
            hint='Such as passband = "0.2 dB" and counts = "tuned-shape".',
        ))  # fmt: skip
    for name in keys.matching:
        known = list(document.data["process"]["devices"].values())
        if name not in known:
            faults.append(UnknownName(
                f"matching.{name}: no device of the request has that name.",
                where=document.where("matching", name), hint=advise(name, known),
            ))  # fmt: skip
    return faults


@contextmanager
def _placed(document: Document[Any], faults: list[GmidError], table: str = "") -> Iterator[None]:
    """Collect the faults that a type finds, with the lines of the keys they name."""
    try:
        yield
    except GmidError as trouble:
        found = trouble.faults if isinstance(trouble, Faults) else (trouble,)
        faults += [place_fault(document, fault, table) for fault in found]


def place_fault(document: Document[Any], fault: GmidError, *around: str | int) -> GmidError:
    """Give a fault whose place is a dotted key its file and line.

    Parameters
    ----------
    document : Document
        Where the key stands.
    fault : GmidError
        With ``where`` a key such as ``filter.edge``.
    *around : str or int
        Tables around that key.

    Returns
    -------
    GmidError
        Of the same kind.

    Examples
    --------
    >>> from gmid.request.request import EXAMPLE
    >>> document = parse_document(EXAMPLE, RequestKeys, name="a.toml")
    >>> print(place_fault(document, DataFault("is odd.", where="supply.voltage")))
    a.toml:11: supply.voltage: is odd.
    """
    inner = [part for part in (fault.where or "").split(".") if part]
    key = [part for part in (*around, *inner) if part != ""]
    name = ".".join(str(part) for part in key)
    text = f"{name}: {fault.message}" if name else fault.message
    return type(fault)(text, where=document.where(*key), hint=fault.hint)


def _plain(keys: Any) -> dict[str, Any]:
    return {name: getattr(keys, name) for name in type(keys).model_fields}


def _read_filter(keys: FilterKeys) -> FilterSpec:
    values = _plain(keys)
    for name in _IN_DB:
        values[f"{name}_db"] = values.pop(name)
    values["sections"] = tuple(_one_section(index, one) for index, one in enumerate(keys.sections))
    for name in ("numerator", "denominator"):
        values[name] = tuple(float(value) for value in values[name])
    return FilterSpec(**values)


def _one_section(index: int, keys: Any) -> Section:
    if keys.f0 is None:
        raise DataFault("a section needs f0.", where=f"filter.sections.{index}")
    values = {name: float(getattr(keys, name)) for name in ("k2", "k1", "k0")}
    return Section(keys.f0, None if keys.q is None else float(keys.q), **values)


def _read_tolerance(keys: Any) -> Tolerance | None:
    if keys.tolerance is None:
        return None
    values = _plain(keys.tolerance)
    return Tolerance(
        passband_db=values["passband"], counts=values["counts"], stopband_db=values["stopband"],
        up_to=values["up_to"], delay=values["delay"],
    )  # fmt: skip


def _read_choices(keys: AmplifierKeys) -> Choices:
    values = _plain(keys)
    values["lengths"] = keys.lengths or ()
    for place in keys.smallest_length:
        if place not in PLACES:
            raise UnknownName(
                f"{place!r} is not a place of the amplifier.",
                where=f"smallest_length.{place}",
                hint=advise(place, PLACES),
            )
    return Choices(**values)


def _read_supply(keys: SupplyKeys) -> Supply:
    return Supply(
        keys.voltage,
        keys.reference_current,
        tolerance=keys.tolerance,
        common_mode=_read_level(keys.common_mode),
        input_common_mode=_optional(keys.input_common_mode, _read_level),
        reference_tolerance=keys.reference_tolerance,
    )


def _optional(value: LevelKeys | None, read: Callable[[LevelKeys], T]) -> T | None:
    return None if value is None else read(value)


def _read_level(level: LevelKeys) -> Level:
    return Level(level.value) if level.is_share else Level(0.0, level.value)


def _read_process(document: Document[Any]) -> Process:
    keys = document.model.process
    roles = {role: name for role, name in _plain(keys.devices).items() if name is not None}
    where = {
        **{key: document.where("process", key) for key in ("table", "digest", "conditions")},
        **{f"devices.{role}": document.where("process", "devices", role) for role in roles},
    }
    return Process(
        document.beside(keys.table), roles, keys.conditions or (), keys.own_well, keys.digest, where
    )
