"""Runs what README.md shows, and compares, or writes the outputs anew.

    python tests/house/readme_walk.py        # rewrite the outputs shown in README.md

In the README a block ``console`` holds commands after ``$`` and what they print; a line ``...``
stands for any number of lines.  A block that follows ``<!-- file: NAME -->`` is written to NAME
in the folder where the commands run; a block ``pycon`` is a doctest.
"""

from __future__ import annotations

import doctest
import os
import re
import shlex
import subprocess
import sys
import tempfile
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
README = ROOT / "README.md"
BLOCK = re.compile(r"(?:<!-- file: (?P<file>\S+) -->\n)?```(?P<kind>\w*)\n(?P<body>.*?)```", re.S)


def prepare_folder(folder: Path) -> None:
    """Put what a clone holds where the commands run."""
    for name in ("demo", "tables"):
        (folder / name).symlink_to(ROOT / name)


def split_commands(body: str) -> list[tuple[str, str]]:
    """Part a console block into commands and what is shown after each."""
    parts = re.split(r"^\$ (.*)\n", body, flags=re.M)
    return list(zip(parts[1::2], parts[2::2], strict=True))


def run_command(command: str, folder: Path) -> str:
    """Run one ``gmid`` command as the reader would, in a window of 100 columns."""
    words = shlex.split(command)
    assert words[0] == "gmid", command
    environment = {
        **os.environ, "COLUMNS": "100", "PYTHONPATH": str(ROOT), "OMP_NUM_THREADS": "1",
    }  # fmt: skip
    done = subprocess.run(
        [sys.executable, "-m", "gmid", *words[1:]], cwd=folder, env=environment,
        stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True, check=False,
    )  # fmt: skip
    assert done.returncode in (0, 3), f"{command}\n{done.stdout}"
    return "\n".join(line.rstrip() for line in done.stdout.splitlines()) + "\n"


def is_same(shown: str, printed: str) -> bool:
    """Compare, with ``...`` for any lines, and with the blank line before the next command."""
    lines = [
        r"(?:.*\n)*?" if line == "..." else re.escape(line) + r"\n"
        for line in shown.rstrip("\n").split("\n")
    ]
    return re.fullmatch("".join(lines), printed.rstrip("\n") + "\n") is not None


def walk(folder: Path):
    """Run every block; yield command, what the README shows, and what was printed."""
    prepare_folder(folder)
    for match in BLOCK.finditer(README.read_text(encoding="utf-8")):
        if match["file"]:
            (folder / match["file"]).write_text(match["body"], encoding="utf-8")
        elif match["kind"] == "console":
            for command, shown in split_commands(match["body"]):
                yield command, shown, run_command(command, folder)
        elif match["kind"] == "pycon":
            yield "python", match["body"], run_doctest(match["body"], folder)


def run_doctest(body: str, folder: Path) -> str:
    """Run a Python session of the README; return it as it should read."""
    example = doctest.DocTestParser().get_doctest(body, {}, "README.md", "README.md", 0)
    before = Path.cwd()
    said: list[str] = []
    os.chdir(folder)
    try:
        failed = doctest.DocTestRunner(optionflags=doctest.ELLIPSIS).run(example, out=said.append)
    finally:
        os.chdir(before)
    return body if not failed.failed else "".join(said)


def rewrite() -> None:
    """Put what the commands print into the README."""
    text = README.read_text(encoding="utf-8")
    with tempfile.TemporaryDirectory() as folder:
        for command, shown, printed in walk(Path(folder)):
            if command == "python":
                sys.stdout.write("" if printed == shown else printed)
            elif not is_same(shown, printed):
                tail = "\n" if shown.endswith("\n\n") else ""
                text = text.replace(f"$ {command}\n{shown}", f"$ {command}\n{printed}{tail}", 1)
    README.write_text(text, encoding="utf-8")


if __name__ == "__main__":
    rewrite()
