"""Filters of tests/requests sized, their verdicts against those expected, and simulated.

Not part of the pass; from the root of the project:

    python tests/benchmarks/compare_filters.py [NAME ...]

Each ``filter_NAME.toml`` is sized; a filter that is met is simulated in every condition at
nominal supply, with the difference over its passband and what is used of its tolerance.
"""

from __future__ import annotations

import sys
import tomllib
from pathlib import Path

import numpy as np
from spent import measure_spent

from gmid.amplifier.filtering.realised import realise_filter
from gmid.amplifier.filtering.result import FilterSizing
from gmid.amplifier.filtering.sizing import size_filter
from gmid.errors import GmidError
from gmid.filters.demand_budget import find_bands
from gmid.request import Request, open_bench, read_request
from gmid.simulation.filters import simulate_filter

ROOT = Path(__file__).resolve().parents[2]
REQUESTS = ROOT / "tests" / "requests"
MODELS = ROOT / "demo" / "larch180" / "models"


def size(request: Request) -> FilterSizing:
    assert request.spec is not None
    assert request.tolerance is not None
    return size_filter(
        request.spec, request.tolerance, request.passives, bench=open_bench(request.process),
        roles=request.process.devices, own_well=request.process.own_well, supply=request.supply,
        choices=request.choices, matching=request.matching,
    )  # fmt: skip


def simulate(request: Request, found: FilterSizing) -> tuple[float, float]:
    """Give the largest difference over the passband, and the largest deviation simulated [dB]."""
    assert request.tolerance is not None
    low, high = find_bands(found.demands.spec, request.tolerance)[0]
    made, stick = found.demands.realisation, found.demands.plane.fine
    worst, deviation = 0.0, 0.0
    for condition, devices in open_bench(request.process):
        models = (MODELS / f"{condition.corner}.inc").read_text(encoding="utf-8")
        models += f"\n.options temp={condition.temperature:g}\n"
        predicted = realise_filter(
            made, found.by_position, devices, request.supply, voltage=request.supply.voltage
        )
        seen = simulate_filter(made, found.plans, request.supply, devices, models, parts=["ac"])
        inside = (seen.frequency >= low) & (seen.frequency <= high)
        error = np.abs(seen.response / predicted.respond(seen.frequency))[inside]
        worst = max(worst, float(np.abs(20 * np.log10(error)).max()))
        if found.demands.spec.style == "active-rc":
            size_db = np.interp(np.log(stick.frequency), np.log(seen.frequency), seen.gain_db)
            measured = stick.measure(10 ** (size_db / 20) + 0j)
            deviation = max(deviation, float(measured.passband_db))
    return worst, deviation


def main(names: list[str]) -> None:
    expected = tomllib.loads((REQUESTS / "expected_filters.toml").read_text(encoding="utf-8"))
    for name in names or sorted(expected):
        request = read_request(REQUESTS / f"filter_{name}.toml")
        begun = measure_spent()
        try:
            found = size(request)
        except GmidError as trouble:
            verdict, text = "refused", str(trouble)
        else:
            verdict = "met" if found.is_met else "missed"
            text = f"{found!r}, {found.review.largest_current / found.floor:.2f} times the floor"
            if found.is_met:
                error, deviation = simulate(request, found)
                text += f"; simulated: {error:.4f} dB off, {deviation:.3f} dB from ideal"
        agrees = "as expected" if verdict == expected[name]["verdict"] else "NOT AS EXPECTED"
        spent = measure_spent() - begun
        sys.stdout.write(f"{name}: {verdict}, {agrees}, {spent:.0f} s: {text}\n")
        sys.stdout.flush()


if __name__ == "__main__":
    main(sys.argv[1:])
