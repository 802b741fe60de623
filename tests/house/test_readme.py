"""README.md and DEVELOPERS.md say what is so."""

from __future__ import annotations

import re
import subprocess
import sys

import readme_walk
from gmid.nomenclature import SWEEP_QUANTITIES
from gmid.sweep.readers import LAYOUTS

README = readme_walk.README.read_text(encoding="utf-8")
DEVELOPERS = (readme_walk.ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")


def test_what_the_readme_shows_is_what_happens(tmp_path):
    for command, shown, printed in readme_walk.walk(tmp_path):
        assert readme_walk.is_same(shown, printed), f"{command}\n{shown}\n--- printed:\n{printed}"


def test_every_command_is_in_the_readme():
    done = subprocess.run(
        [sys.executable, "-m", "gmid", "--help"], capture_output=True, text=True, check=True
    )
    commands = re.findall(r"^  ([a-z]+) ", done.stdout.split("Commands:")[1], re.M)
    assert len(commands) >= 3
    for command in commands:
        assert f"gmid {command}" in README, command


def test_every_quantity_and_layout_is_in_the_readme():
    for name in [*SWEEP_QUANTITIES, *LAYOUTS]:
        assert re.search(rf"`[^`]*\b{re.escape(name)}\b[^`]*`", README), name


def test_the_tree_in_developers_is_the_tree():
    package = readme_walk.ROOT / "gmid"
    rooms = sorted(
        entry.name + ("/" if entry.is_dir() else "")
        for entry in package.iterdir()
        if entry.name != "__pycache__" and (entry.is_dir() or entry.suffix == ".py")
    )
    for room in rooms:
        if not room.startswith("__"):
            assert re.search(rf"^ +{re.escape(room)} ", DEVELOPERS, re.M), room
