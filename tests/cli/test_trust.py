"""What every command that writes leaves behind when the disk is full or it is killed."""

from __future__ import annotations

import os
import re
import resource
import signal
import subprocess
import sys
from contextlib import contextmanager
from pathlib import Path
from types import SimpleNamespace

import pytest

from builders import Grid, rows, write_csv, write_recipe
from gmid.sheet.data import Sheet
from gmid.sweep.importing import import_recipe
from gmid.sweep.recipe_file import read_recipe
from gmid.table.saving import save_sweeps
from gmid.tasks import sizing

ROOT = Path(__file__).resolve().parents[2]
TABLE = ROOT / "tables" / "larch180.h5"
PLAN = ROOT / "demo" / "channel_amplifier_plan.toml"
FILTER = """\
format = 1
title = "T"
[process]
table = "none.h5"
[process.devices]
n = "nmos"
p = "pmos"
[supply]
voltage = "1.8 V"
reference_current = "2 uA"
[filter]
response = "butterworth"
kind = "lowpass"
order = 2
edge = "1 MHz"
style = "active-rc"
swing = "0.5 V"
capacitor = "2 pF"
[tolerance]
passband = "0.2 dB"
"""

WRITERS = {
    "import": ["import", "recipe.toml", "-o", "out/t.h5"],
    "inspect": ["inspect", "a.csv", "--recipe", "out/r.toml"],
    "figures": ["show", "small.h5", "--figures", "out"],
    "chart": ["chart", TABLE, "nmos", "--length", "1u", "--show", "ft", "-o", "out/a.svg"],
    "filter": ["filter", "filter.toml", "-o", "out"],
    "size": ["size", "request.toml", "-o", "out"],
    "netlist": ["netlist", PLAN, "-o", "out"],
    "new recipe": ["new", "recipe", "-o", "out/r.toml"],
    "new request": ["new", "request", "-o", "out/q.toml"],
}
"""A command line for everything that writes files."""


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """A folder with input files, where every command has written once."""
    folder = tmp_path_factory.mktemp("trust")
    write_csv(folder / "a.csv", rows(Grid(length=(0.2e-6, 0.4e-6), vsb=(0.0, 0.6))))
    write_recipe(folder, "a.csv")
    (folder / "filter.toml").write_text(FILTER)
    sweeps = import_recipe(read_recipe(folder / "recipe.toml"))
    save_sweeps(folder / "small.h5", sweeps, process="invented")
    return folder


@pytest.fixture
def write(gmid, folder, monkeypatch):
    """Run a writer; what sizing would find is made up, for the search takes its time."""
    found = SimpleNamespace(
        is_met=True, sheet=Sheet(title="T", amplifiers=()),
        files=lambda _: {f"{name}.txt": name * 3000 for name in ("sheet", "plan", "amplifier")},
    )  # fmt: skip
    monkeypatch.setattr(sizing, "size", lambda *_, **__: found)
    monkeypatch.chdir(folder)

    def run(name: str, *more: str):
        (folder / "out").mkdir(exist_ok=True)
        return gmid(*WRITERS[name], *more)

    return run


@pytest.fixture
def out(folder):
    """The folder that is written to, emptied before and after."""
    target = folder / "out"
    target.mkdir(exist_ok=True)
    yield target
    for entry in target.iterdir():
        entry.unlink()


def read(folder: Path) -> dict[str, bytes]:
    return {entry.name: entry.read_bytes() for entry in folder.iterdir()}


@contextmanager
def full_disk(room: int):
    """Let the system refuse all that a file would hold beyond some bytes."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (room, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


@pytest.mark.parametrize("name", [name for name in WRITERS if name != "import"])
def test_a_full_disk_leaves_what_was_there(write, out, name):
    assert write(name).code == 0
    before = read(out)
    assert before
    for path in out.iterdir():
        path.write_bytes(b"old " + before[path.name])
    old = read(out)
    largest = max(map(len, before.values()))
    for room in (0, largest - 1):
        with full_disk(room):
            done = write(name, "--force")
        assert (done.code, done.out) == (1, "")
        assert "cannot be written: file too large. Make room, or write elsewhere." in done.err
        assert read(out) == old
    for path in out.iterdir():
        path.unlink()
    with full_disk(100):
        assert write(name).code == 1
    assert read(out) == {}


def start(code: str, folder: Path, *words: object) -> subprocess.Popen[str]:
    """Run a command in a process of its own, after some lines that make it stumble."""
    code = f"import sys\n{code}\nfrom gmid.cli.app import main\nmain()"
    return subprocess.Popen(
        [sys.executable, "-c", code, *map(str, words)], cwd=folder, text=True,
        env={**os.environ, "PYTHONPATH": str(ROOT)}, stderr=subprocess.PIPE,
        stdout=subprocess.DEVNULL,
    )  # fmt: skip


def test_a_full_disk_leaves_the_table_that_was_there(write, out, folder):
    assert write("import").code == 0
    old = read(out)
    size = len(old["t.h5"])
    code = f"import resource\nresource.setrlimit(resource.RLIMIT_FSIZE, ({size // 2}, {size // 2}))"
    with start(code, folder, *WRITERS["import"], "--force") as command:
        told = command.stderr.read()
    assert command.returncode == 1, told
    assert "t.h5: cannot be written: file too large. Make room" in told
    assert "Traceback" not in told
    assert read(out) == old


STOP = """
import os, time
from gmid.files import whole
done = 0
real = whole.{where}
def stop(*words):
    global done
    done += 1
    if done == {count}:
        sys.stderr.write("ready\\n")
        time.sleep(60)
    return real(*words)
whole.{where} = stop
"""


@pytest.mark.parametrize(
    ("name", "where", "count"),
    [
        ("import", "_settle", 1), ("netlist", "_settle", 3), ("netlist", "_place", 3),
        ("figures", "_place", 1),
    ],
)  # fmt: skip
def test_a_killed_command_leaves_whole_files(write, out, folder, name, where, count):
    assert write(name).code == 0
    new = read(out)
    for path in out.iterdir():
        if name != "import":
            path.write_bytes(b"old")
    old = read(out)
    words = [*WRITERS[name], "--force"]
    with start(STOP.format(where=where, count=count), folder, *words) as command:
        while "ready" not in (line := command.stderr.readline()):
            assert line, "it ended before it came to the place"
        command.send_signal(signal.SIGKILL)
        command.wait(30)
    left = {name: raw for name, raw in read(out).items() if not name.startswith(".")}
    assert left.keys() == old.keys()
    moved = [name for name, raw in left.items() if raw != old[name]]
    assert all(left[name] == new[name] for name in moved)
    assert len(moved) == (count - 1 if where == "_place" else 0)
    assert write(name, "--force").code == 0
    assert read(out).keys() == new.keys(), "the next run clears what the killed one left"


def test_only_one_place_opens_files_to_write():
    """Whoever writes a file goes through `gmid.files`, which the tests above try."""
    opens = re.compile(
        r"\bopen\([^)]*[\"'][wax]b?[+\"']|\.(?:write_text|to_csv|to_excel|savetxt)\("
    )
    for path in (ROOT / "gmid").rglob("*.py"):
        code = "".join(path.read_text(encoding="utf-8").split('"""')[::2])
        found = [line.strip() for line in code.splitlines() if opens.search(line)]
        if "files" not in path.relative_to(ROOT).parts:
            assert [line for line in found if "os.devnull" not in line] == [], path


def test_answers_do_not_depend_on_the_number_of_threads(tmp_path):
    """Neither on those of the linear algebra nor on the processes that measure."""
    told = []
    for threads, cores in (("1", "sorted(allowed)[:1]"), ("2", "allowed")):
        code = (
            "import os, sys\nallowed = os.sched_getaffinity(0)\n"
            f"os.sched_setaffinity(0, {cores})\nfrom gmid.cli.app import main\nmain()"
        )
        done = subprocess.run(
            [sys.executable, "-c", code, "check", str(PLAN), "--json"], cwd=tmp_path, text=True,
            env={**os.environ, "PYTHONPATH": str(ROOT), "OMP_NUM_THREADS": threads,
                 "OPENBLAS_NUM_THREADS": threads},
            capture_output=True, check=True,
        )  # fmt: skip
        told.append(done.stdout)
    assert told[0]
    assert told[0] == told[1]
