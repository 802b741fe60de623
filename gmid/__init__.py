"""Size on-chip filter amplifiers from gm/Id tables made of simulator sweeps.

A process sweep becomes a table once; the table answers bias questions; a filter says what its
amplifiers must meet; and transistor lengths, currents and unit counts are found that meet it in
every condition.  All numbers are SI floats or arrays, temperatures degrees Celsius.

Examples
--------
>>> import tempfile
>>> from pathlib import Path
>>> import gmid
>>> from gmid.device.example import example_sweep
>>> from gmid.table.saving import save_sweeps
>>> with tempfile.TemporaryDirectory() as folder:
...     path = Path(folder) / "invented.h5"
...     _ = save_sweeps(path, [example_sweep()], process="invented")
...     nmos = gmid.open_table(path).device("nmos", corner="tt", temperature=27)
...     point = nmos.at(gm_over_id=15, length=0.5e-6, vds=0.6, vsb=0.0)
>>> float(point.vgs.round(3))
0.49
"""

from __future__ import annotations

import importlib
import sys
from types import ModuleType
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from gmid.device.opening import open_table as open_table
    from gmid.request.reading import read_request as read_request
    from gmid.tasks.checking import check as check
    from gmid.tasks.demanding import demands as demands
    from gmid.tasks.sheeting import sheet as sheet
    from gmid.tasks.sizing import size as size

__all__ = [
    "check",
    "demands",
    "open_table",
    "read_request",
    "sheet",
    "size",
]

_HOMES = {
    "check": "gmid.tasks.checking",
    "demands": "gmid.tasks.demanding",
    "open_table": "gmid.device.opening",
    "read_request": "gmid.request.reading",
    "sheet": "gmid.tasks.sheeting",
    "size": "gmid.tasks.sizing",
}
"""Module of each public name: loaded when the name is first used, so that start-up stays light."""


class _Surface(ModuleType):
    """The public surface, where a function stays in view though a subpackage bears its name."""

    def __setattr__(self, name: str, value: Any) -> None:
        if not (name in _HOMES and isinstance(value, ModuleType)):
            super().__setattr__(name, value)


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    value = getattr(importlib.import_module(_HOMES[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted({*globals(), *_HOMES})


sys.modules[__name__].__class__ = _Surface
