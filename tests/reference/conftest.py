"""Tables that the comparisons with the reference simulator share."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

import pytest

import cards
from gmid.condition import Condition
from gmid.device import DeviceTable, open_table
from gmid.files.locks import locked
from gmid.sweep.importing import import_recipe
from gmid.sweep.recipe_file import read_recipe
from gmid.table.saving import save_sweeps

ROOT = Path(__file__).resolve().parents[2]


@pytest.fixture(scope="session")
def shared_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Temporary folder that all workers of one run share."""
    base = tmp_path_factory.getbasetemp()
    return base.parent if base.name.startswith("popen-") else base


@pytest.fixture(scope="session")
def demo_table(shared_folder: Path) -> DeviceTable:
    """Table of the demo process: the one that is shipped, or made of the demo's sweeps."""
    shipped = ROOT / "tables" / "larch180.h5"
    if shipped.exists():
        return open_table(shipped)
    path = shared_folder / "larch180.h5"
    with locked(path, wait=300.0):
        if not path.exists():
            recipe = read_recipe(ROOT / "demo" / "larch180" / "larch180.toml")
            save_sweeps(path, import_recipe(recipe), process=recipe.process)
    return open_table(path)


@pytest.fixture(scope="session")
def make_process_table(shared_folder: Path) -> Callable[..., DeviceTable]:
    """Give the table of an invented process, simulated when first asked for."""

    def make(
        name: str,
        *,
        devices: Sequence[str] = ("nmos", "pmos"),
        conditions: Sequence[Condition] = cards.CONDITIONS,
    ) -> DeviceTable:
        words = [name, *devices, *(str(condition).replace("/", "_") for condition in conditions)]
        path = shared_folder / f"{'-'.join(words)}.h5"
        with locked(path, wait=600.0):
            if not path.exists():
                cards.PROCESSES[name].write_table(path, devices=devices, conditions=conditions)
        return open_table(path)

    return make
