"""Every check of the project: style, types, import direction, tests.

    python3 tests/run.py [pytest arguments]

Makes its own environment in ``.venv/tests``.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT / "demo"))

from environment import prepare  # noqa: E402


def main() -> None:
    """Run the checks one after the other; stop at the first that fails."""
    python = prepare("tests", "test")
    environment = {
        **os.environ,
        "OMP_NUM_THREADS": "1",
        "OPENBLAS_NUM_THREADS": "1",
        "MPLBACKEND": "Agg",
    }
    steps = {
        "style": ["-m", "ruff", "check", "."],
        "types": ["-m", "mypy"],
        "import direction": [
            "-c",
            "from importlinter.cli import lint_imports_command as run; run()",
        ],
        "tests": ["-m", "pytest", "-n", "2", *sys.argv[1:]],
    }
    for name, words in steps.items():
        print(f"\n== {name} ==", flush=True)
        begin = time.monotonic()
        done = subprocess.run([str(python), *words], cwd=ROOT, env=environment, check=False)
        print(f"== {name}: {time.monotonic() - begin:.0f} s", flush=True)
        if done.returncode:
            sys.exit(f"{name} failed with exit code {done.returncode}.")


if __name__ == "__main__":
    main()
