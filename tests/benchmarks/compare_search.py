"""The search on all requests, and against differential evolution over the same exact analysis.

Run by hand::

    python tests/benchmarks/compare_search.py requests [NAME ...]
    python tests/benchmarks/compare_search.py evolution [--times N] [--size P] [NAME ...]

`requests` sizes every file of tests/requests, compares the verdict with expected.toml, simulates
what was met in all conditions at low, nominal and high supply, and prints the worst difference
between prediction and simulation. `evolution` lets scipy's differential evolution look for a
cheaper amplifier of the same form by the same exact analysis, spending several times the bias
points, from closed-form sketches with every number moved at random; what it found is then also
refined by the search's own moves.
"""

from __future__ import annotations

import argparse
import tomllib
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from spent import measure_spent

from gmid.amplifier import crew, predict
from gmid.amplifier.search.dress import dress
from gmid.amplifier.search.evaluation import Evaluator, Outcome, Point
from gmid.amplifier.search.find import SearchResult, find_plan
from gmid.amplifier.search.refine import Candidate, Refiner, rate
from gmid.amplifier.search.searcher import Searcher
from gmid.amplifier.search.sketch import draw_charts
from gmid.amplifier.search.space import Rows, Space
from gmid.amplifier.search.starts import choose_conditions, find_starts
from gmid.request import open_bench, read_request
from gmid.simulation.comparison import compare_plan
from gmid.simulation.plans import simulate_plan

ROOT = Path(__file__).resolve().parents[2]
REQUESTS = ROOT / "tests" / "requests"
MODELS = ROOT / "demo" / "larch180" / "models"
FIVE = ("slow_sensor", "cascoded_60", "cascoded_p", "low_supply", "receive_channel")
POLISHES = 6
LIMITS = {"dc_gain_db": 0.1, "gbw": 0.003, "phase_margin": 0.2, "supply_current": 0.001}
ABSOLUTE = ("dc_gain_db", "phase_margin")


def list_names() -> list[str]:
    skipped = ("expected", "filter_")
    return sorted(f.stem for f in REQUESTS.glob("*.toml") if not f.stem.startswith(skipped))


def size(name: str) -> tuple[SearchResult, float]:
    request = read_request(REQUESTS / f"{name}.toml")
    begun = measure_spent()
    found = find_plan(
        request.demands, load_capacitance=request.load_capacitance,
        load_resistance=request.load_resistance, bench=open_bench(request.process),
        roles=request.process.devices, own_well=request.process.own_well, supply=request.supply,
        choices=request.choices, matching=request.matching, name=name,
    )  # fmt: skip
    return found, measure_spent() - begun


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


@dataclass
class Spent:
    """Bias points evaluated so far, with all that is measured there."""

    points: int = 0


@contextmanager
def counted() -> Iterator[Spent]:
    """Count the bias points that evaluators solve, all of them in this process meanwhile."""
    spent, plain, counting = Spent(), Evaluator.evaluate, crew.count_processes

    def evaluate(self: Evaluator, rows: Rows, points: Sequence[Point],
                 watch: np.ndarray | None = None) -> Outcome:  # fmt: skip
        spent.points += len(rows) * len(points)
        return plain(self, rows, points, watch)

    Evaluator.evaluate = evaluate  # type: ignore[method-assign]
    crew.count_processes = lambda: 1
    try:
        yield spent
    finally:
        Evaluator.evaluate = plain  # type: ignore[method-assign]
        crew.count_processes = counting


def open_searcher(name: str) -> Searcher:
    request = read_request(REQUESTS / f"{name}.toml")
    return Searcher(
        request.demands, (request.load_capacitance, request.load_resistance),
        tuple(open_bench(request.process)), request.process.devices, request.process.own_well,
        request.supply, request.choices, request.matching,
    )  # fmt: skip


class Evolution:
    """Differential evolution on the logarithms of all numbers of a form.

    It begins with rough sketches of the form, every number of them moved at random, and knows
    nothing of what the search found but the places where that binds; places where its own best
    misses something are added until there are none.
    """

    def __init__(self, search: Searcher, refiner: Refiner, known: Candidate) -> None:
        self.space, self.task = refiner.space, search.task
        self.refiner = refiner
        self.evaluator = Evaluator(self.space, search.setting)
        self.minimise = search.choices.minimise
        self.values = [np.log(self.space.values[one]) for one in self.space.names]
        self.chosen = self._find_places(known)

    def _find_places(self, known: Candidate) -> np.ndarray:
        """Give what is watched: each goal where it is worst, and the largest current."""
        margins = np.where(self.refiner.watch, known.outcome.margins[0], np.inf)
        chosen = np.zeros(margins.shape, dtype=bool)
        for goal in range(margins.shape[1]):
            chosen[int(np.argmin(margins[:, goal])), goal] = True
        chosen[int(np.argmax(known.outcome.current[0])), 0] = True
        return chosen

    def add_places(self, seen: Candidate) -> bool:
        """Watch also where a candidate misses; tell whether there was such a place."""
        margins = np.where(self.refiner.watch, seen.outcome.margins[0], np.inf)
        before = self.chosen.sum()
        for goal in np.flatnonzero(margins.min(axis=0) < 0):
            self.chosen[int(np.argmin(margins[:, goal])), goal] = True
        return bool(self.chosen.sum() > before)

    def decode(self, columns: np.ndarray) -> Rows:
        """Round logarithms to the nearest allowed numbers."""
        found = [
            np.searchsorted(0.5 * (one[1:] + one[:-1]), column)
            for one, column in zip(self.values, columns, strict=True)
        ]
        return np.stack(found, axis=-1)

    def cost(self, columns: np.ndarray) -> np.ndarray:
        rows, which = np.unique(self.decode(columns), axis=0, return_inverse=True)
        active = np.flatnonzero(self.chosen.any(axis=1))
        points = [self.refiner.points[k] for k in active]
        outcome = self.evaluator.evaluate(rows, points, self.chosen[active])
        return rate(outcome, self.minimise)[which.ravel()]

    def populate(self, size: int) -> np.ndarray:
        """Make a population around many sketches: every number moved, by a third as a rule."""
        low = float(self.task.supply.voltages[0])
        charts = [
            draw_charts(self.space, self.task.book, k, self.task.supply, low, self.task.swing)
            for k in choose_conditions(self.task, self.space)
        ]
        rows = dress(self.task, self.space, find_starts(self.task, self.space, charts, size))
        dice = np.random.default_rng(1)
        base = rows[dice.integers(0, len(rows), size)]
        columns = [one[base[:, k]] for k, one in enumerate(self.values)]
        moved = np.stack(columns, axis=-1) + dice.normal(0.0, 0.35, base.shape)
        bounds = np.array(self.bounds)
        return np.clip(moved, bounds[:, 0], bounds[:, 1])

    @property
    def bounds(self) -> list[tuple[float, float]]:
        return [(float(one[0]), max(float(one[-1]), float(one[0]) + 1e-9)) for one in self.values]

    def run(self, spent: Spent, budget: int, size: int) -> Candidate:
        """Evolve until so many bias points are spent."""
        from scipy.optimize import differential_evolution

        population, limit = self.populate(size), spent.points + budget
        stop = [0.0]

        def enough(intermediate_result: object) -> bool:
            return spent.points >= stop[0]

        for part in (0.5, 0.75, 0.9, 1.0):
            stop[0] = limit - (1 - part) * budget
            result = differential_evolution(
                self.cost, self.bounds, init=population, maxiter=100_000, vectorized=True,
                updating="deferred", tol=0, atol=-1, polish=False, rng=1,
                strategy="currenttobest1bin", mutation=(0.3, 0.8), recombination=0.7,
                callback=enough,
            )  # fmt: skip
            population = result.population
            best = self.refiner.settle(self.decode(result.x[:, None]))[0]
            self.add_places(best)
        return best


def evolve(name: str, times: float, size: int) -> str:
    """Give a line: the search, evolution, and evolution with the search's own moves after it."""
    search = open_searcher(name)
    with counted() as spent:
        refiner, known = search.run()
        used, begun = spent.points, measure_spent()
        evolution = Evolution(search, refiner, known)
        found = evolution.run(spent, int(times * used), size)
        more, seconds = spent.points - used, measure_spent() - begun
        polished = found
        for _ in range(POLISHES):
            better = refiner.improve(polished)
            if better.cost >= polished.cost - 1e-3:
                break
            polished = better
    mine, other, last = (
        float(one.outcome.current.max()) for one in (known, found, polished)
    )  # fmt: skip
    return (
        f"{name:18} {mine * 1e6:7.2f}uA {used:8d} {other * 1e6:7.2f}uA {more:9d} {seconds:5.0f}s "
        f"{found.missed:7.4f} {mine / other:6.3f} {last * 1e6:7.2f}uA {polished.missed:7.4f} "
        f"{mine / last:6.3f}\n{compare(refiner.space, known, polished)}"
    )


def compare(space: Space, known: Candidate, other: Candidate) -> str:
    """Spell the numbers in which two candidates differ."""
    words = []
    for name, column in space.column.items():
        one, two = (float(space.values[name][at.row[column]]) for at in (known, other))
        if one != two:
            words.append(f"{name} {one:.3g} -> {two:.3g}")
    return "    " + ", ".join(words)


def show_evolution(names: list[str], times: float, size: int) -> None:
    print(f"{'request':18} {'search':>9} {'points':>8} {'evolution':>9} {'points':>9} {'cpu':>6} "
          f"{'missed':>7} {'ratio':>6} {'refined':>9} {'missed':>7} {'ratio':>6}")  # fmt: skip
    for name in names:
        print(evolve(name, times, size), flush=True)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("what", choices=("requests", "evolution"))
    parser.add_argument("names", nargs="*")
    parser.add_argument("--times", type=float, default=4.0, help="of the search's bias points")
    parser.add_argument("--size", type=int, default=100, help="of the population")
    asked = parser.parse_intermixed_args()
    if asked.what == "requests":
        show_requests(asked.names or list_names())
    else:
        show_evolution(asked.names or list(FIVE), asked.times, asked.size)


if __name__ == "__main__":
    main()
