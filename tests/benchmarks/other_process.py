"""Filters sized on a second invented process, and simulated; with the reference tests' cards.

Not part of the pass; from the root of the project, with the extra `test`:

    PYTHONPATH=tests:tests/reference:demo python tests/benchmarks/other_process.py [NAME ...]

The process has a thick oxide, long channels and a supply of 3.3 V; its table is simulated first.
"""

from __future__ import annotations

import sys

import numpy as np
from spent import measure_spent

from gmid.amplifier.filtering.realised import realise_filter
from gmid.amplifier.filtering.sizing import size_filter
from gmid.amplifier.plan import Supply
from gmid.condition import Condition
from gmid.filters import FilterSpec, Tolerance
from gmid.simulation.filters import simulate_filter
from reference.amplifier_cases import find_devices, find_models

PROCESS = "birch350"
CONDITIONS = tuple(Condition.parse(one) for one in ("tt/27", "ss/-40"))
SUPPLY = Supply(3.3, 20e-6, tolerance=0.1)
SPECS = {
    "lowpass": FilterSpec(
        response="butterworth", order=3, edge=200e3, swing=0.6, snr_db=62.0,
        noise_band=(1e3, 200e3), load_capacitance=0.5e-12,
    ),
    "bandpass": FilterSpec(
        response="chebyshev", kind="bandpass", order=1, ripple_db=0.5, edge=(100e3, 200e3),
        swing=0.4, snr_db=54.0, noise_band=(100e3, 200e3),
    ),
    "gm_c": FilterSpec(
        response="bessel", order=2, edge=1e6, style="gm-c", swing=0.02, snr_db=36.0,
        noise_band=(1e3, 1e6), load_capacitance=0.3e-12,
    ),
}  # fmt: skip


def main(names: list[str]) -> None:
    bench = [(one, find_devices(PROCESS, str(one))) for one in CONDITIONS]
    for name in names or list(SPECS):
        begun = measure_spent()
        tolerance = Tolerance(passband_db=0.5 if name == "gm_c" else 0.3, counts="tuned-shape")
        found = size_filter(
            SPECS[name], tolerance, bench=bench, roles={"n": "nmos", "p": "pmos"}, supply=SUPPLY
        )
        sys.stdout.write(
            f"{name}: {found!r}, {found.review.largest_current / found.floor:.2f} times the "
            f"floor, {measure_spent() - begun:.0f} s\n"
        )
        low, high = found.demands.plane.fine.passband
        made = found.demands.realisation
        for condition, devices in bench:
            predicted = realise_filter(
                made, found.by_position, devices, SUPPLY, voltage=SUPPLY.voltage
            )
            seen = simulate_filter(
                made, found.plans, SUPPLY, devices, find_models(PROCESS, condition),
                parts=["ac", "startup"],
            )  # fmt: skip
            inside = (seen.frequency >= low) & (seen.frequency <= high)
            error = np.abs(seen.response / predicted.respond(seen.frequency))[inside]
            sys.stdout.write(
                f"    {condition}: {np.abs(20 * np.log10(error)).max():.4f} dB off, start-up "
                f"within {seen.startup_error * 1e6:.2g} uV\n"
            )
        sys.stdout.flush()


if __name__ == "__main__":
    main(sys.argv[1:])
