"""The demo, from nothing: import the sweeps, ask the table, size the flow meter's filter.

    python3 demo/run.py

Everything it writes lies in ``demo/out``.  The process ``larch180`` is invented.
"""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

from environment import ROOT, prepare

OUT = ROOT / "demo" / "out"


def main() -> None:
    """Run each step, showing the command as a user would type it."""
    python = prepare("demo")
    OUT.mkdir(exist_ok=True)
    table = OUT / "larch180.h5"
    run(python, "import", "demo/larch180/larch180.toml", "-o", table, "--compact", "--force")
    run(python, "show", table)
    lengths = ["--length", "0.18u,0.5u,1u", "--vds", "0.6"]
    run(python, "query", table, "nmos", "--gm-over-id", "5:25:5", *lengths, "--id", "10u")
    charts = {
        "nmos.svg": ["nmos", *lengths],
        "nmos_by_vgs.svg": ["nmos", *lengths, "--against", "vgs"],
        "corners.pdf": ["nmos", "pmos", "--length", "0.5u", "--vds", "0.6",
                        "--condition", "tt/27,ss/125,ff/-40"],
    }  # fmt: skip
    for name, words in charts.items():
        run(python, "chart", table, *words, "-o", OUT / name, "--force")
    run(python, "filter", "demo/flow_meter.toml")
    for name in ("channel_amplifier", "flow_meter"):
        run(python, "size", f"demo/{name}.toml", "-o", OUT / name, "--force")
    run(python, "check", OUT / "flow_meter" / "plan.toml")
    print(f"\nDone. Open {OUT.relative_to(ROOT)}/flow_meter/sheet.html.")


def run(python: Path, *arguments: object) -> None:
    """Show and run one gmid command; stop where it fails."""
    words = [
        os.path.relpath(word, ROOT) if isinstance(word, Path) else str(word) for word in arguments
    ]
    print(f"\n$ gmid {' '.join(words)}", flush=True)
    done = subprocess.run([str(python), "-m", "gmid", *words], cwd=ROOT, check=False)
    if done.returncode:
        sys.exit(f"gmid {words[0]} ended with exit code {done.returncode}.")


if __name__ == "__main__":
    main()
