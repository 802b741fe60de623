"""Make an environment of the project's own under ``.venv`` and run a command in it.

Used by ``demo/run.py`` and ``tests/run.py``; needs nothing but Python itself.  A stamp with
the Python version, the place and the hash of ``pyproject.toml`` is written last, so that an
interrupted installation is never taken for a whole one.
"""

from __future__ import annotations

import hashlib
import importlib.util
import json
import os
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent


def prepare(name: str, extras: str = "") -> Path:
    """Return the Python of environment ``.venv/NAME``, made or renewed where needed."""
    require_python()
    folder = ROOT / ".venv" / name
    python = folder / ("Scripts/python.exe" if os.name == "nt" else "bin/python")
    stamp = folder / "stamp.json"
    wanted = _stamp(extras)
    if stamp.exists() and python.exists() and _read(stamp) == wanted:
        print(f"Environment {folder.relative_to(ROOT)} is up to date.", flush=True)
        return python
    print(f"Making the environment {folder.relative_to(ROOT)} ...", flush=True)
    _run([sys.executable, "-m", "venv", "--clear", str(folder)])
    print("Installing gmid and what it needs (a minute or two) ...", flush=True)
    target = f"{ROOT}[{extras}]" if extras else str(ROOT)
    _run(
        [
            str(python),
            "-m",
            "pip",
            "install",
            "--quiet",
            "--disable-pip-version-check",
            "--editable",
            target,
        ]
    )
    stamp.write_text(json.dumps(wanted, indent=1))
    return python


def require_python() -> None:
    """Stop with words where this Python is too old or cannot make environments."""
    version = f"{sys.version_info.major}.{sys.version_info.minor}"
    if sys.version_info < (3, 11):  # noqa: UP036 - the very thing to find out
        sys.exit(f"gmid needs Python 3.11 or newer; this is {version}.")
    if importlib.util.find_spec("venv") is None or importlib.util.find_spec("ensurepip") is None:
        sys.exit(
            "This Python cannot make environments (ensurepip is missing). On Debian and its "
            f"kin install it with:  sudo apt install python{version}-venv"
        )


def _stamp(extras: str) -> dict[str, str]:
    digest = hashlib.sha256((ROOT / "pyproject.toml").read_bytes()).hexdigest()
    return {"python": sys.version, "place": str(ROOT), "pyproject": digest, "extras": extras}


def _read(stamp: Path) -> object:
    try:
        return json.loads(stamp.read_text())
    except ValueError:
        return None


def _run(command: list[str]) -> None:
    done = subprocess.run(command, cwd=ROOT, check=False)
    if done.returncode:
        sys.exit(f"This step failed with exit code {done.returncode}: {' '.join(command)}")
