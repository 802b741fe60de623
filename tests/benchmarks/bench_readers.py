"""Reading speed and peak memory of the text readers against bare pandas on the same bytes.

Run by hand: ``python tests/benchmarks/bench_readers.py [rows]``.  Each case runs in a process
of its own, so that the peak is its own; the ratio is of medians taken in turn.  On a loaded
machine the ratio of processor times is the steadier one, but it ignores that ours reads in
several threads.
"""

from __future__ import annotations

import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

COLUMNS = 13
ROUNDS = 5


def write_samples(folder: Path, rows: int) -> None:
    """Write the same random table in the five layouts, the listings with a tenth of the rows."""
    import numpy as np

    table = np.random.default_rng(1).normal(size=(rows, COLUMNS)) * 1e-6
    names = [f"x{j}" for j in range(COLUMNS)]
    with (folder / "a.csv").open("w") as file:
        file.write(",".join(names) + "\n")
        file.writelines(",".join(map(repr, row)) + "\n" for row in table.tolist())
    with (folder / "a.txt").open("w") as file:
        file.write(" ".join(names) + "\n")
        file.writelines(" ".join(f"{v: .16e}" for v in row) + "\n" for row in table.tolist())
    with (folder / "a.raw").open("w") as file:
        file.write("Title: t\nPlotname: dc\nFlags: real\n")
        file.write(f"No. Variables: {COLUMNS}\nNo. Points: {rows}  \nVariables:\n")
        file.writelines(f"\t{j}\t{name}\tnotype\n" for j, name in enumerate(names))
        file.write("Values:\n")
        for index, row in enumerate(table.tolist()):
            file.write(f" {index}\t" + "\n\t".join(f"{v:.15e}" for v in row) + "\n\n")
    with (folder / "a.lis").open("w") as file:
        ruler = "-" * 80
        file.write(f"log of a run\n\n  t\n  dc\n{ruler}\nIndex   {'  '.join(names)}\n{ruler}\n")
        for index, row in enumerate(table[: rows // 10].tolist()):
            file.write(f"{index}\t" + "\t".join(f"{v:.9e}" for v in row) + "\t\n")
    with (folder / "a.op").open("w") as file:
        for row in table[: rows // 10].tolist():
            pairs = zip(names, row, strict=True)
            file.write("".join(f"@m1[{name}] = {v:.9e}\n" for name, v in pairs) + "\n")


def bare(path: Path) -> int:
    """Read with nothing but pandas."""
    import pandas as pd

    if path.suffix == ".raw":
        skip = 7 + COLUMNS
        frame = pd.read_csv(path, sep="\t", header=None, names=["i", "v"], usecols=["v"],
                            skiprows=skip, dtype="float64", engine="c")  # fmt: skip
        return len(frame) // COLUMNS
    if path.suffix == ".op":
        frame = pd.read_csv(path, sep="=", header=None, names=["n", "v"], usecols=["v"],
                            dtype="float64", engine="c")  # fmt: skip
        return len(frame) // COLUMNS
    if path.suffix == ".lis":
        return len(
            pd.read_csv(path, sep=r"\s+", header=None, skiprows=7, dtype="float64", engine="c")
        )
    separator = "," if path.suffix == ".csv" else r"\s+"
    return len(pd.read_csv(path, sep=separator, dtype="float64", engine="c"))


def ours(path: Path) -> int:
    """Read with the layout recognised, checks and checksum included."""
    from gmid.sweep.readers import read_text
    from gmid.sweep.source import open_source

    source = open_source(path)
    table = read_text(source)[0]
    assert len(source.sha256) == 64
    return table.rows


def read_peak() -> float:
    """Tell the largest resident size of this process so far [MB]."""
    status = Path("/proc/self/status").read_text()
    return int(status.split("VmHWM:")[1].split()[0]) / 1024


def measure(path: Path, readers: dict[str, Callable[[Path], int]]) -> None:
    """Print median times, taken in turn, and the peak above the start."""
    import numpy  # noqa: F401
    import pandas  # noqa: F401

    before = read_peak()
    times: dict[str, list[float]] = {name: [] for name in readers}
    efforts: dict[str, list[float]] = {name: [] for name in readers}
    rows = 0
    for _ in range(ROUNDS if len(readers) > 1 else 1):
        for name, reader in readers.items():
            start, effort = time.perf_counter(), time.process_time()
            rows = reader(path)
            times[name].append(time.perf_counter() - start)
            efforts[name].append(time.process_time() - effort)
    peak = read_peak() - before
    table = rows * COLUMNS * 8 / 2**20
    middle = {name: statistics.median(taken) for name, taken in times.items()}
    effort = {name: statistics.median(taken) for name, taken in efforts.items()}
    if len(readers) > 1:
        ratio = middle["ours"] / middle["bare"]
        processor = effort["ours"] / effort["bare"]
        print(f"{path.suffix}: bare {middle['bare']:.3f} s, ours {middle['ours']:.3f} s, "
              f"ratio {ratio:.2f}, of processor times {processor:.2f}")  # fmt: skip
    else:
        print(f"{path.suffix}: {next(iter(readers))} peak {peak:.0f} MB, table {table:.0f} MB, "
              f"{peak / table:.2f} tables")  # fmt: skip


def main() -> None:
    """Run all cases."""
    if len(sys.argv) == 3:
        readers = {"bare": bare, "ours": ours}
        chosen = readers if sys.argv[2] == "both" else {sys.argv[2]: readers[sys.argv[2]]}
        measure(Path(sys.argv[1]), chosen)
        return
    rows = int(sys.argv[1]) if len(sys.argv) > 1 else 300_000
    with tempfile.TemporaryDirectory() as folder:
        write_samples(Path(folder), rows)
        for suffix in ("csv", "txt", "raw", "lis", "op"):
            for mode in ("both", "bare", "ours"):
                command = [sys.executable, __file__, f"{folder}/a.{suffix}", mode]
                subprocess.run(command, check=True)


if __name__ == "__main__":
    main()
