"""How commands end: readers that leave, full disks, closed streams, Ctrl-C."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from pathlib import Path

import pytest

from builders import Grid, rows, write_csv, write_recipe
from gmid.cli import charting
from gmid.device.example import example_sweep
from gmid.files import locked
from gmid.table.saving import save_sweeps

ROOT = Path(__file__).resolve().parents[2]
SMALL = ["--length", "1u", "--vds", "0.6", "--gm-over-id", "15"]
LARGE = ["--length", "1u", "--vds", "0.6", "--vgs", "0:1.2:0.0005"]


@pytest.fixture(scope="module")
def table(tmp_path_factory):
    path = tmp_path_factory.mktemp("ends") / "t.h5"
    save_sweeps(path, [example_sweep()], process="ash90")
    return path


def start(*words: object, shell: str = "", **streams: object) -> subprocess.Popen[str]:
    command = [sys.executable, "-m", "gmid", *map(str, words)]
    if shell:
        command = ["sh", "-c", f'exec "$@" {shell}', "sh", *command]
    environment = {name: value for name, value in os.environ.items() if name != "PYTHONUNBUFFERED"}
    return subprocess.Popen(
        command, env=environment | {"PYTHONPATH": str(ROOT)}, text=True,
        **{"stdout": subprocess.PIPE, "stderr": subprocess.PIPE} | streams,
    )  # fmt: skip


@pytest.mark.parametrize("words", [SMALL, LARGE, [*LARGE, "--json"]])
def test_a_reader_that_leaves_is_no_error(table, words):
    with start("query", table, "nmos", *words) as command:
        command.stdout.close()
        told = command.stderr.read()
    assert command.returncode == 141
    assert "Traceback" not in told
    assert "rror" not in told


def test_a_reader_that_leaves_after_one_line(table):
    with start("query", table, "nmos", *LARGE) as command:
        assert command.stdout.readline().startswith("corner")
        command.stdout.close()
        assert command.wait(30) == 141
        assert "Broken" not in command.stderr.read()


def test_a_reader_of_the_messages_that_leaves_does_not_show(table):
    with start("query", table, "nmos", *SMALL) as command:
        command.stderr.close()
        command.stdout.read()
    assert command.returncode == 141


def test_a_full_disk_under_the_output_is_told(table):
    with open("/dev/full", "w") as full, start("query", table, "nmos", *SMALL, stdout=full) as done:
        told = done.stderr.read()
    assert done.returncode == 1
    last = told.splitlines()[-1]
    assert last == "gmid: the output cannot be written: no space left on device. Make room."
    assert "Traceback" not in told


@pytest.mark.parametrize("closed", ["1", "2"])
def test_a_closed_stream_is_nobody_reading(table, closed):
    with start("query", table, "nmos", *SMALL, shell=f"{closed}>&-") as command:
        out, err = command.communicate(timeout=60)
    assert command.returncode == 0
    assert (out == "") == (closed == "1")
    assert (err == "") == (closed == "2")


def heed_interrupts() -> None:
    """Undo what a shell does to a process in the background: it does not hear Ctrl-C."""
    signal.signal(signal.SIGINT, signal.default_int_handler)


def test_an_interrupted_import_ends_with_130(tmp_path):
    write_csv(tmp_path / "a.csv", rows(Grid(length=(0.2e-6, 0.4e-6), vsb=(0.0, 0.6))))
    write_recipe(tmp_path, "a.csv")
    with (
        locked(tmp_path / "t.h5", wait=1.0),
        start(
            "import",
            tmp_path / "recipe.toml",
            "-o",
            tmp_path / "t.h5",
            preexec_fn=heed_interrupts,
        ) as command,
    ):
        while "Waiting for" not in (line := command.stderr.readline()):
            assert line, "it ended before it waited for the lock"
        command.send_signal(signal.SIGINT)
        told = command.communicate(timeout=60)[1]
    assert command.returncode == 130
    assert told.strip() == "Interrupted."
    assert not (tmp_path / "t.h5").exists()


def test_an_interrupted_chart_leaves_nothing(gmid, table, tmp_path, monkeypatch):
    def interrupt(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr(charting, "_draw", interrupt)
    done = gmid("chart", table, "nmos", "-o", tmp_path / "a.svg", "--length", "1u")
    assert done.code == 130
    assert done.err.endswith("\nInterrupted.\n")
    assert list(tmp_path.iterdir()) == []


def test_a_chart_finds_an_existing_file_before_the_work(gmid, table, tmp_path, monkeypatch):
    def refuse(*_, **__):
        raise AssertionError("the work had begun")

    monkeypatch.setattr(charting, "choose_devices", refuse)
    (tmp_path / "a.svg").write_text("mine")
    done = gmid("chart", table, "nmos", "-o", tmp_path / "a.svg")
    assert done.code == 1
    assert done.err == f"gmid: {tmp_path / 'a.svg'}: already exists. Give --force to replace it.\n"


@pytest.mark.parametrize(
    "words",
    [
        ["query", "t.h5", "nmos", *SMALL], ["chart", "t.h5", "nmos", "-o", "a.svg"],
        ["filter", "r.toml"], ["size", "r.toml", "-o", "out"], ["check", "plan.toml"],
        ["simulate", "plan.toml", "--models", "tt/27=tt.inc"],
    ],
)  # fmt: skip
def test_output_has_one_form(gmid, words):
    done = gmid(*words, "--json", "--csv")
    assert (done.code, done.out) == (2, "")
    assert done.err == "gmid: --json and --csv exclude each other. Give one.\n"


def test_netlist_lists_its_files(gmid, tmp_path):
    plan = ROOT / "demo" / "channel_amplifier_plan.toml"
    done = gmid("netlist", plan, "-o", tmp_path / "n", "--json")
    assert done.json["format"] == 1
    assert done.json["directory"] == str(tmp_path / "n")
    assert done.json["files"] == sorted(entry.name for entry in (tmp_path / "n").iterdir())
