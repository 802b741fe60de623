"""Guesses at what the columns of a text mean, each with how sure it is.

Nothing here decides: what is not certain becomes a question in a drafted recipe.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from gmid.nomenclature import CAPACITANCES, SWEEP_QUANTITIES
from gmid.sweep.texttable import Column

_WRAPPED = re.compile(r"[a-z]+\((@.*)\)")
_DEVICE = re.compile(
    r"@(?P<at>[^\[\]]+)\[(?P<bracket>\w+)\]|(?P<dot>[mx][\w.]*?)[.:](?P<plain>[a-z]\w*)"
)
_NODE = re.compile(
    r"v\((?P<node>[a-z]+)\)|(?P<bare>[gdsb])|v_?(?P<short>[gdsb])"
    r"|v(?P<long>gate|drain|source|bulk|body)"
)
_CURRENT = re.compile(
    r"i\(v_?d\w*\)|v_?d\w*#branch|i_?d(?:s|rain)?\(\w+\)|v_?d\w*:flow\(br\)|v_?d:p"
)
_PARAMETERS = {
    "id": "id", "ids": "id", "ide": "id", "gm": "gm", "gds": "gds", "go": "gds", "gmb": "gmb",
    "gmbs": "gmb", "vth": "vth", "von": "vth", "vdsat": "vdsat", "vdss": "vdsat", "vgs": "vgs",
    "vds": "vds", "vbs": "-vsb", "vsb": "vsb", "l": "length", "length": "length", "leff": "",
    "lch": "length", "w": "", "m": "",
    **{name: name for name in CAPACITANCES},
}  # fmt: skip
_PLAIN = {
    **{name: name for name in (*SWEEP_QUANTITIES, "length", "vsb", "vds", "vgs")},
    "l": "length", "lch": "length", "vbs": "-vsb", "gmbs": "gmb", "ids": "id", "i_d": "id",
         "v_gs": "vgs",
    "v_ds": "vds", "v_sb": "vsb", "v_bs": "-vsb", "temp": "temperature", "t": "temperature",
    "temper": "temperature", "temperature": "temperature", "corner": "corner",
    "device": "device", "polarity": "polarity", "width": "width", "fingers": "fingers",
    "nf": "fingers",
}  # fmt: skip
_RATIOS = ("gm/id", "gmid", "gm_id", "gm_over_id", "ft", "vov", "vod", "intrinsic_gain")
_SCALES = ("v-sweep", "v(v-sweep)", "sweep", "scale", "dc", "index", "alter#", "x")
_TERMINALS = {"gate": "g", "drain": "d", "source": "s", "bulk": "b", "body": "b"}


@dataclass(frozen=True)
class Role:
    """What a column seems to be.

    Parameters
    ----------
    name : str
        Standard name of an axis, quantity or condition; ``node g`` for a node voltage,
        ``scale`` or ``ratio``; empty when nothing is known.
    sign : str
        ``-`` when the column has the other sign.
    certain : bool
        Whether the file leaves no doubt.
    device : str
        The transistor that the column's name tells, if any.

    Examples
    --------
    >>> Role("gm", device="m1").name
    'gm'
    """

    name: str = ""
    sign: str = ""
    certain: bool = True
    device: str = ""


def guess_role(column: Column) -> Role:
    """Guess what a column is from its name.

    Parameters
    ----------
    column : Column
        As read.

    Returns
    -------
    Role
        The guess.

    Examples
    --------
    >>> guess_role(Column("v(@m1[gmbs])", None, np.zeros(1)))
    Role(name='gmb', sign='', certain=True, device='m1')
    >>> guess_role(Column("v(d)", "V", np.zeros(1))).name
    'node d'
    """
    folded = column.name.strip().lower()
    wrapped = _WRAPPED.fullmatch(folded)
    folded = wrapped[1] if wrapped else folded
    device = _DEVICE.fullmatch(folded)
    if device is not None and (device["bracket"] or device["plain"]) in _PARAMETERS:
        return _signed(_PARAMETERS[device["bracket"] or device["plain"]], _device_of(device))
    if folded in _PLAIN:
        return _plain(_PLAIN[folded], column)
    if folded == "w":
        return Role("width", certain=False)
    if folded in _RATIOS:
        return Role("ratio")
    if folded in ("ro", "rds", "rout"):
        return Role("gds", certain=False)
    if folded in _SCALES:
        return Role("scale", certain=False)
    node = _NODE.fullmatch(folded)
    if node is not None:
        word = next(group for group in node.groups() if group)
        word = _TERMINALS.get(word, word)
        return Role(f"node {word}", certain=False) if word in "gdsb" else Role()
    if _CURRENT.fullmatch(folded):
        return Role("id", sign="" if re.match(r"i_?d", folded) else "-")
    return Role()


def _device_of(match: re.Match[str]) -> str:
    return match["at"] or match["dot"]


def _signed(name: str, device: str = "") -> Role:
    return Role(name.lstrip("-"), sign="-" if name.startswith("-") else "", device=device)


def _plain(name: str, column: Column) -> Role:
    """Doubt a length that its unit or its value does not explain."""
    role = _signed(name)
    if role.name in ("length", "width") and column.unit is None:
        values = column.values
        fits = values.dtype.kind == "f" and bool(np.all((values > 1e-9) & (values < 1e-3)))
        return Role(role.name, certain=fits)
    if role.name == "temperature" and column.unit is None and len(column.name) < 4:
        return Role(role.name, certain=False)
    return role


def find_devices(columns: Sequence[Column]) -> list[str]:
    """List the transistors whose quantities stand in the columns.

    Parameters
    ----------
    columns : sequence of Column
        Of one table.

    Returns
    -------
    list of str
        Names in the order of the columns.

    Examples
    --------
    >>> find_devices([Column("@m1[gm]", None, np.zeros(1)), Column("@m2[gm]", None, np.zeros(1))])
    ['m1', 'm2']
    """
    roles = [guess_role(column) for column in columns]
    return list(dict.fromkeys(role.device for role in roles if role.device))
