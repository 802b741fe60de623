"""The search on all requests, and against differential evolution over the same exact analysis.

Run by hand::

    python tests/benchmarks/compare_search.py requests [NAME ...]
    python tests/benchmarks/compare_search.py evolution [--generations N] [NAME ...]

`requests` sizes every file of tests/requests, compares the verdict with expected.toml, simulates
what was met in all conditions at low, nominal and high supply, and prints the worst difference
between prediction and simulation. `evolution` lets scipy's differential evolution look for a
cheaper amplifier of the same form, starting from perturbed closed-form sketches.
"""

from __future__ import annotations

import argparse
import time
import tomllib
from dataclasses import replace
from pathlib import Path

import numpy as np

from gmid.amplifier import predict
from gmid.amplifier.search.dress import dress
from gmid.amplifier.search.evaluation import Evaluator
from gmid.amplifier.search.find import SearchResult, find_plan
from gmid.amplifier.search.refine import Refiner, rate
from gmid.amplifier.search.searcher import Searcher, list_points
from gmid.request import open_bench, read_request
from gmid.simulation.comparison import compare_plan
from gmid.simulation.plans import simulate_plan

ROOT = Path(__file__).resolve().parents[2]
REQUESTS = ROOT / "tests" / "requests"
MODELS = ROOT / "demo" / "larch180" / "models"
FIVE = ("slow_sensor", "cascoded_60", "cascoded_p", "large_load", "tight_noise")
LIMITS = {"dc_gain_db": 0.1, "gbw": 0.003, "phase_margin": 0.2, "supply_current": 0.001}
ABSOLUTE = ("dc_gain_db", "phase_margin")


def list_names() -> list[str]:
    skipped = ("expected", "filter_")
    return sorted(f.stem for f in REQUESTS.glob("*.toml") if not f.stem.startswith(skipped))


def size(name: str) -> tuple[SearchResult, float]:
    request = read_request(REQUESTS / f"{name}.toml")
    begun = time.process_time()
    found = find_plan(
        request.demands, load_capacitance=request.load_capacitance,
        load_resistance=request.load_resistance, bench=open_bench(request.process),
        roles=request.process.devices, own_well=request.process.own_well, supply=request.supply,
        choices=request.choices, matching=request.matching, name=name,
    )  # fmt: skip
    return found, time.process_time() - begun


def simulate(name: str, found: SearchResult) -> tuple[float, str]:
    """Give the worst difference over its limit, and which figure it is."""
    request = read_request(REQUESTS / f"{name}.toml")
    worst, which = 0.0, ""
    for condition, devices in open_bench(request.process):
        models = (MODELS / f"{condition.corner}.inc").read_text()
        models += f"\n.options temp={condition.temperature:g}\n"
        for voltage in request.supply.voltages:
            predicted = predict(found.plan, devices, request.supply, voltage=float(voltage))
            simulated = simulate_plan(
                found.plan, request.supply, devices, models, voltage=float(voltage),
                gbw=float(predicted.signal.gbw), parts=("bias", "open_loop"),
            )  # fmt: skip
            for one in compare_plan(predicted, simulated):
                if one.name in LIMITS:
                    size = one.difference if one.name in ABSOLUTE else one.relative
                    over = abs(size) / LIMITS[one.name]
                    if over > worst:
                        worst, which = over, f"{one.name} {condition}/{voltage:g}"
    return worst, which


def show_requests(names: list[str]) -> None:
    expected = tomllib.loads((REQUESTS / "expected.toml").read_text())
    print(f"{'request':18} {'verdict':8} {'expected':8} {'form':28} {'current':>9} {'/floor':>7} "
          f"{'cpu':>6}  worst error over its limit, or what binds")  # fmt: skip
    for name in names:
        found, seconds = size(name)
        verdict = "met" if found.met else "missed"
        if found.met:
            last = "{:.2f} ({})".format(*simulate(name, found))
        else:
            binding = found.binding
            last = (f"{binding.name} {binding.achieved:.4g} of {binding.required:.4g} in "
                    f"{binding.condition}. {found.suggestion}")  # fmt: skip
        current = found.floor * found.ratio_to_floor
        print(f"{name:18} {verdict:8} {expected[name]['verdict']:8} {found.plan.variant!s:28} "
              f"{current * 1e6:7.2f}uA {found.ratio_to_floor:7.2f} {seconds:5.1f}s  {last}",
              flush=True)  # fmt: skip


def evolve(name: str, generations: int) -> tuple[float, float, float]:
    """Give the current found by the search, by evolution, and what evolution still misses."""
    from scipy.optimize import differential_evolution

    found, _ = size(name)
    request = read_request(REQUESTS / f"{name}.toml")
    variant = found.plan.variant
    choices = replace(
        request.choices, input_pair=variant.input_pair, output=variant.output,
        common_mode_sense=variant.common_mode_sense,
    )  # fmt: skip
    search = Searcher(
        request.demands, (request.load_capacitance, request.load_resistance),
        tuple(open_bench(request.process)), request.process.devices, request.process.own_well,
        request.supply, choices, request.matching,
    )  # fmt: skip
    ((space, starts),) = search.rank_forms()
    task = search.task
    evaluator = Evaluator(space, search.setting)
    everywhere = list_points(task, search.goals, task.supply.voltages[[0, -1]])
    refiner = Refiner(evaluator, *everywhere, choices.minimise)
    points, watch = list_points(task, search.goals, task.supply.voltages[:1])

    def cost(columns: np.ndarray) -> np.ndarray:
        rows = np.clip(np.round(columns.T).astype(np.intp), 0, space.largest)
        return rate(evaluator.evaluate(rows, points, watch), choices.minimise)

    population = perturb(dress(task, space, starts), space.largest)
    result = differential_evolution(
        cost, [(0, max(int(top), 1e-9)) for top in space.largest], init=population,
        maxiter=generations, integrality=True, vectorized=True, updating="deferred", tol=0,
        polish=False, rng=1, mutation=(0.4, 0.9), recombination=0.8,
    )  # fmt: skip
    best = np.clip(np.round(result.x).astype(np.intp), 0, space.largest)
    final = refiner.settle(best[None])[0]
    mine = found.floor * found.ratio_to_floor
    return mine, float(final.outcome.current.max()), final.missed


def perturb(rows: np.ndarray, largest: np.ndarray, size: int = 120) -> np.ndarray:
    """Make a population around sketches."""
    rng = np.random.default_rng(1)
    base = rows[rng.integers(0, len(rows), size)].astype(float)
    base += np.round(rng.normal(0.0, 1.5, base.shape) * (rng.random(base.shape) < 0.4))
    return np.clip(base, 0, largest)


def show_evolution(names: list[str], generations: int) -> None:
    print(f"{'request':18} {'search':>9} {'evolution':>9} {'ratio':>6} {'missed by evolution':>20}")
    for name in names:
        mine, other, missed = evolve(name, generations)
        print(f"{name:18} {mine * 1e6:7.2f}uA {other * 1e6:7.2f}uA {mine / other:6.3f} "
              f"{missed:20.4f}", flush=True)  # fmt: skip


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("what", choices=("requests", "evolution"))
    parser.add_argument("names", nargs="*")
    parser.add_argument("--generations", type=int, default=150)
    asked = parser.parse_intermixed_args()
    if asked.what == "requests":
        show_requests(asked.names or list_names())
    else:
        show_evolution(asked.names or list(FIVE), asked.generations)


if __name__ == "__main__":
    main()
