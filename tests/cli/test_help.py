"""Help texts in narrow and wide windows, and what the shell completes."""

from __future__ import annotations

import os
import re
import shlex
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import pytest

from gmid.condition import Condition
from gmid.device.example import example_sweep
from gmid.table.saving import save_sweeps

ROOT = Path(__file__).resolve().parents[2]
COMMANDS = (
    "inspect", "import", "show", "query", "chart", "filter", "size", "check", "netlist", "simulate",
    "new recipe", "new request",
)  # fmt: skip


@pytest.fixture
def help_of(gmid, monkeypatch):
    def run(command: str, columns: int) -> str:
        monkeypatch.setenv("COLUMNS", str(columns))
        done = gmid(*command.split(), "--help")
        assert (done.code, done.err) == (0, "")
        return done.out

    return run


@pytest.mark.parametrize("columns", [60, 140])
@pytest.mark.parametrize("command", ["", "new", *COMMANDS])
def test_help_fits_the_window_and_reads_well(help_of, command, columns):
    text = help_of(command, columns)
    assert max(map(len, text.splitlines())) <= min(columns, 100)
    assert "..." not in text.partition("Commands:")[2], "a line of the list is cut off"


@pytest.mark.parametrize("command", COMMANDS)
def test_every_help_has_an_example_of_options_that_exist(help_of, command):
    text = help_of(command, 140)
    (example,) = re.findall(rf"Example: (gmid {command} .*)", text)
    words = shlex.split(example)[1 + len(command.split()) :]
    assert words
    assert len(f"  Example: {example}") <= 80
    for word in words:
        if word.startswith("-"):
            assert re.search(rf"(^|, | ){re.escape(word)}\b", text, re.M), word
    arguments = re.findall(r"^Usage: .*\[OPTIONS\](.*)", text, re.M)[0]
    assert arguments == arguments.upper()


@pytest.fixture(scope="module")
def complete(tmp_path_factory):
    """What a shell is offered for the word under the cursor, the last one."""
    folder = tmp_path_factory.mktemp("complete")
    sweep = example_sweep()
    sweeps = [replace(sweep, device=name) for name in ("nmos", "nmos_low", "pmos")]
    sweeps.append(replace(sweep, condition=Condition("ss", 107.0)))
    save_sweeps(folder / "t.h5", sweeps, process="ash90")

    def run(line: str) -> list[str]:
        code = "import sys; sys.argv = ['gmid']; from gmid.cli.app import main; main()"
        environment = {
            **os.environ, "_GMID_COMPLETE": "complete_bash", "COMP_WORDS": line,
            "COMP_CWORD": str(len(line.split(" ")) - 1), "PYTHONPATH": str(ROOT),
        }  # fmt: skip
        done = subprocess.run(
            [sys.executable, "-c", code], cwd=folder, env=environment, capture_output=True,
            text=True, check=False,
        )  # fmt: skip
        assert (done.returncode, done.stderr) == (0, "")
        return done.stdout.split()

    return run


def test_commands_and_options_are_completed(complete, help_of):
    assert complete("gmid ") == [command for command in COMMANDS if " " not in command] + ["new"]
    assert complete("gmid new re") == ["recipe", "request"]
    assert complete("gmid query --gm") == ["--gm-over-id", "--gm"]
    offered = complete("gmid chart --")
    for option in re.findall(r"^  (?:-\w, )?(--[\w-]+)", help_of("chart", 140), re.M):
        assert option in offered


def test_devices_and_quantities_are_completed(complete):
    assert complete("gmid query t.h5 nm") == ["nmos", "nmos_low"]
    assert complete("gmid chart t.h5 nmos p") == ["pmos"]
    assert complete("gmid query no.h5 n") == []
    assert complete("gmid query t.h5 nmos --show gm,intr") == ["gm,intrinsic_gain"]
    assert complete("gmid chart t.h5 nmos --against v") == ["vgs"]
