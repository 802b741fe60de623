"""Cold start of the terminal against bare imports, in fresh processes taken in turn.

Run by hand: ``python tests/benchmarks/bench_start.py [TABLE.h5]``.  Goals: ``gmid --help`` at
most 8 times bare Python, ``gmid query`` at most 1.6 times ``import numpy, h5py, typer``. The
check judges a drafted plan in all conditions of the demo table.
Processor time is given beside elapsed time because other work on the machine does not stretch
it; both are the medians of the rounds, and the quickest round stands in brackets.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
ROUNDS = 15
QUERY = ["--gm-over-id", "5:25:5", "--length", "0.5u,1u", "--vds", "0.6", "--id", "10u"]

REQUEST = """\
format = 1
title = "Drafted"
[process]
table = "{table}"
[process.devices]
n = "nmos"
p = "pmos"
[supply]
voltage = "1.8 V"
reference_current = "2 uA"
[demands]
gbw = "10 MHz"
load_capacitance = "1 pF"
"""


def write_table(folder: Path) -> Path:
    """Write a table of the closed-form example device."""
    from gmid.device.example import example_sweep
    from gmid.table.saving import save_sweeps

    path = folder / "example.h5"
    save_sweeps(path, [example_sweep()], process="invented")
    return path


def write_check(folder: Path) -> Path:
    """Write a drafted plan of the demo process, to be judged in all of its conditions."""
    from gmid.amplifier.drafting import Draft, draft_plan
    from gmid.amplifier.places import Variant
    from gmid.request import open_bench, write_plan
    from gmid.request.reading import parse_request

    request = parse_request(REQUEST.format(table=(ROOT / "tables" / "larch180.h5").as_posix()))
    _, devices = next(iter(open_bench(request.process)))
    wanted = Draft({"n": "nmos", "p": "pmos"}, Variant(), 8e-6, 1e-12)
    path = folder / "plan.toml"
    path.write_text(write_plan(request, [draft_plan(wanted, devices, request.supply)], folder))
    return path


def run_once(words: list[str], environment: dict[str, str]) -> tuple[float, float]:
    """Tell elapsed and processor time of one process [s]."""
    before, begin = os.times(), time.perf_counter()
    subprocess.run([sys.executable, *words], env=environment, cwd=ROOT, check=True,
                   stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)  # fmt: skip
    elapsed, after = time.perf_counter() - begin, os.times()
    used = after.children_user + after.children_system
    return elapsed, used - before.children_user - before.children_system


def main() -> None:
    """Measure every case and print the ratios."""
    sys.path.insert(0, str(ROOT))
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        table = Path(sys.argv[1]).resolve() if len(sys.argv) > 1 else write_table(folder)
        environment = {**os.environ, "PYTHONPYCACHEPREFIX": str(folder / "bytecode"),
                       "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}  # fmt: skip
        environment.pop("PYTHONDONTWRITEBYTECODE", None)
        query = ["-m", "gmid", "query", str(table), "nmos", *QUERY]
        cases = {
            "bare python": ["-c", "pass"],
            "numpy h5py typer": ["-c", "import numpy, h5py, typer"],
            "gmid --help": ["-m", "gmid", "--help"],
            "gmid query": query,
            "gmid query --json": [*query, "--json"],
            "gmid check": ["-m", "gmid", "check", str(write_check(folder))],
        }
        for words in cases.values():
            run_once(words, environment)
        times: dict[str, list[tuple[float, float]]] = {case: [] for case in cases}
        for _ in range(ROUNDS):
            for case, words in cases.items():
                times[case].append(run_once(words, environment))
    report(times)


def report(times: dict[str, list[tuple[float, float]]]) -> None:
    """Print times and ratios."""
    bases = {"gmid --help": "bare python"}
    for case, taken in times.items():
        base = times[bases.get(case, "numpy h5py typer")]
        texts = []
        for index, kind in enumerate(("elapsed", "processor")):
            here, there = ([pair[index] for pair in pairs] for pairs in (taken, base))
            middle, least = statistics.median(here), min(here)
            text = f"{kind} {middle * 1e3:4.0f} ms [{least * 1e3:4.0f}]"
            if case.startswith("gmid"):
                text += f" ratio {middle / statistics.median(there):.2f} [{least / min(there):.2f}]"
            texts.append(text)
        print(f"{case:18}{', '.join(texts)}")


if __name__ == "__main__":
    main()
