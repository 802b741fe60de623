"""One invented sweep, written in every layout; run as a script it writes the samples anew.

The writers follow descriptions of the layouts and use nothing of the package.  Each case is the
end of a recipe and the files that go with it.
"""

from __future__ import annotations

import sys
from pathlib import Path

FOLDER = Path(__file__).parent
sys.path.insert(0, str(FOLDER.parent))

from layouts import simulators, tables  # noqa: E402
from layouts.invented import CASES, COLUMNS, GRID, NAMES  # noqa: E402

__all__ = ["CASES", "COLUMNS", "FOLDER", "GRID", "NAMES", "simulators", "tables", "write_case"]


def write_case(name: str, folder: Path) -> str:
    """Write the files of a case and give the rest of its recipe."""
    more, files = CASES[name]()
    for file, data in files.items():
        target = folder / file
        target.parent.mkdir(parents=True, exist_ok=True)
        target.write_bytes(data)
    return more


if __name__ == "__main__":
    for label in CASES:
        write_case(label, FOLDER / "samples" / label)
