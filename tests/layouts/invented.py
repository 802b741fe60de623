"""The invented sweep of the layouts, and what its writers share.

Nothing here uses the package: the numbers come from formulas.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator

from builders import Grid, rows

GRID = Grid(
    length=(0.18e-6, 0.36e-6), vsb=(0.0, 0.6), vds=(0.0, 0.3, 0.9, 1.8),
    vgs=(0.0, 0.3, 0.6, 0.9, 1.2, 1.5, 1.8),
)  # fmt: skip
COLUMNS = rows(GRID)
NAMES = ("id", "gm", "gds", "gmb")
SIZE = COLUMNS["id"].size
INNER = len(GRID.vgs)

Case = tuple[str, dict[str, bytes]]
CASES: dict[str, Callable[[], Case]] = {}


def case(make: Callable[[], Case]) -> Callable[[], Case]:
    """Register a writer."""
    CASES[make.__name__.replace("_", "-")] = make
    return make


def row(k: int, *names: str) -> list[float]:
    return [float(COLUMNS[name][k]) for name in names]


def blocks(size: int) -> Iterator[range]:
    for start in range(0, SIZE, size):
        yield range(start, start + size)


def micro(k: int) -> str:
    return f"{COLUMNS['length'][k] * 1e6:.2f}"


def text(lines: list[str]) -> bytes:
    return ("\n".join(lines) + "\n").encode()
