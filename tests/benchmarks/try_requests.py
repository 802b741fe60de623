"""Random requests of one amplifier, sized; some of those met also simulated.

Run by hand::

    python tests/benchmarks/try_requests.py [NUMBER] [--seed S] [--simulate K] [--keep DIR]
    python tests/benchmarks/try_requests.py 1 --seed S --first I     # one of them again

Values lie across what the invented process can do and beyond, so that many cannot be met: then a
nearest plan and a sentence are wanted, never an uncaught error. Request I of a seed is the same
whatever NUMBER is. The first K that are met are simulated at the nominal supply in three
conditions, and the largest difference from the prediction, in parts of what is allowed, is
printed. Ends with code 1 where anything raised, or a difference was too large.
"""

from __future__ import annotations

import argparse
import random
import sys
import traceback
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from spent import measure_spent

import gmid
from gmid.condition import Condition
from gmid.errors import GmidError
from gmid.request.plans import PlanFile
from gmid.request.reading import parse_request
from gmid.tasks.simulating import QUICK, read_models, simulate
from gmid.tasks.sized import Sizing

ROOT = Path(__file__).resolve().parents[2]
MODELS = ROOT / "demo" / "larch180" / "models"
BESIDE = ROOT / "tests" / "requests" / "random.toml"
ALL = ("tt/27", "ss/-40", "ss/125", "ff/-40", "ff/125", "sf/27", "fs/27")
SIMULATED = ("tt/27", "ss/125", "ff/-40")
LIMITS = {
    "dc_gain_db": 0.1, "gbw": 0.003, "phase_margin": 0.2, "supply_current": 0.001,
    "common_mode.dc_gain_db": 0.2,
}  # fmt: skip
"""Allowed difference of prediction and simulation: absolute in dB and degrees, else relative."""


def spread(dice: random.Random, low: float, high: float) -> float:
    """A value that is as likely in one decade as in another, to three digits."""
    return float(f"{low * (high / low) ** dice.random():.3g}")


def make_request(seed: int, index: int) -> str:
    """The text of one random request."""
    dice = random.Random(f"{seed}/{index}")
    voltage = dice.choice((1.8, 1.8, 1.8, 1.8, 1.8, 1.5, 1.2, 1.0))
    some = ["tt/27", *dice.sample(ALL[1:], dice.choice((2, 4, 6)))]
    lines = [
        "format = 1", f'title = "Random request {seed}/{index}"', "[process]",
        'table = "../../tables/larch180.h5"', f"conditions = {some}",
        *(['own_well = ["pmos"]'] if dice.random() < 0.7 else []),
        "[process.devices]", 'n = "nmos"', 'p = "pmos"',
        *(['follower = "nmos_low"'] if dice.random() < 0.8 else []),
        *(['pair = "nmos_low"'] if voltage < 1.5 and dice.random() < 0.5 else []),
        "[supply]", f'voltage = "{voltage:g} V"', f'tolerance = "{dice.choice((0, 5, 10))} %"',
        f'reference_current = "{spread(dice, 0.5, 20):g} uA"',
        f'reference_tolerance = "{dice.choice((0, 10, 20))} %"',
        *([f'common_mode = "{dice.randint(35, 65)} %"'] if dice.random() < 0.3 else []),
        *([f'input_common_mode = "{dice.randint(20, 80)} %"'] if dice.random() < 0.3 else []),
        "[demands]", *_list_demands(dice, voltage), "[amplifier]", *_list_choices(dice),
    ]  # fmt: skip
    if dice.random() < 0.3:
        lines += ["[matching]", 'nmos = { avt = "3.5 mV um", abeta = "1 % um" }',
                  'pmos = { avt = "3.2 mV um", abeta = "1 % um" }']  # fmt: skip
        if 'follower = "nmos_low"' in lines or 'pair = "nmos_low"' in lines:
            lines.append('nmos_low = { avt = "4 mV um", abeta = "1 % um" }')
    return "\n".join(lines) + "\n"


def _list_demands(dice: random.Random, voltage: float) -> Iterator[str]:
    yield f'gbw = "{spread(dice, 0.3, 80):g} MHz"'
    yield f'load_capacitance = "{spread(dice, 0.1, 10):g} pF"'
    if dice.random() < 0.85:
        yield f'dc_gain = "{dice.uniform(30, 78):.1f} dB"'
    if dice.random() < 0.85:
        yield f'phase_margin = "{dice.uniform(45, 75):.0f} deg"'
    if dice.random() < 0.5:
        yield f'load_resistance = "{spread(dice, 20, 20e3):g} kohm"'
    if dice.random() < 0.7:
        yield f'swing = "{dice.uniform(0.05, 0.6) * voltage:.2f} V"'
    if dice.random() < 0.4:
        at = spread(dice, 0.01, 10)
        yield f'input_noise = {{ density = "{spread(dice, 6, 200):g} nV/rtHz", at = "{at:g} MHz" }}'
    if dice.random() < 0.4:
        yield f'slew_rate = "{spread(dice, 0.3, 150):g} V/us"'
    if dice.random() < 0.1:
        yield f'supply_current = "{spread(dice, 5, 500):g} uA"'
    if dice.random() < 0.1:
        yield f'output_current = "{spread(dice, 1, 200):g} uA"'
    if dice.random() < 0.1:
        yield f'common_mode_gain = "{dice.uniform(-20, 10):.0f} dB"'


def _list_choices(dice: random.Random) -> Iterator[str]:
    if dice.random() < 0.3:
        yield f'input_pair = "{dice.choice("np")}"'
    if dice.random() < 0.3:
        yield f'output = "{dice.choice(("plain", "cascoded"))}"'
    if dice.random() < 0.3:
        yield f'common_mode_sense = "{dice.choice(("resistors", "followers", "pairs"))}"'
    if dice.random() < 0.2:
        yield f"largest_count = {dice.choice((8, 16, 32, 128))}"
    if dice.random() < 0.2:
        yield 'minimise = "area"'
    if dice.random() < 0.2:
        yield f'saturation_margin = "{dice.choice((0, 20, 100))} mV"'


@dataclass
class Outcome:
    """What became of one request."""

    index: int
    verdict: str
    seconds: float
    note: str
    worst: float | None = None


def try_one(text: str, index: int) -> tuple[Outcome, Sizing | None]:
    """Size one request; an uncaught error is an outcome here, with its traceback printed."""
    begun = measure_spent()
    try:
        found = gmid.size(parse_request(text, name=f"random/{index}", path=BESIDE))
    except GmidError as fault:
        return Outcome(index, "refused", measure_spent() - begun, str(fault)), None
    except Exception as error:
        traceback.print_exc()
        sys.stderr.write(f"--- the request:\n{text}\n")
        note = f"{type(error).__name__}: {error}"
        return Outcome(index, "RAISED", measure_spent() - begun, note), None
    note = found.sheet.sentence
    if found.is_met:
        amplifier = found.sheet.amplifiers[0]
        current = max(row.supply_current for row in amplifier.conditions)
        note = f"{found.plans[0].variant}, {current * 1e6:.3g} uA"
    return Outcome(index, found.sheet.verdict, measure_spent() - begun, note), found


def rate_simulation(found: Sizing) -> tuple[float, str]:
    """The largest difference over what is allowed, and which figure it is."""
    there = {f"{row.corner}/{row.temperature:g}" for row in found.sheet.amplifiers[0].conditions}
    files = {
        Condition.parse(name): MODELS / f"{name.partition('/')[0]}.inc"
        for name in SIMULATED
        if name in there
    }
    worst, which = 0.0, "-"
    for one in simulate(PlanFile(found.request, found.plans), read_models(files), parts=QUICK):
        for figure in one.figures:
            limit = LIMITS.get(figure.name)
            if limit is None:
                continue
            absolute = figure.unit in ("dB", "deg")
            gap = abs(figure.difference if absolute else figure.relative) / limit
            if not gap <= worst:
                worst, which = gap, f"{figure.name} in {one.condition}"
    return worst, which


def main() -> int:
    """Size, simulate, and print a line for each request as it is done."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("number", nargs="?", type=int, default=100)
    parser.add_argument("--first", type=int, default=0)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--simulate", type=int, default=20, metavar="K")
    parser.add_argument("--keep", type=Path, metavar="DIR", help="write each request there")
    asked = parser.parse_args()
    outcomes, left = [], asked.simulate
    for index in range(asked.first, asked.first + asked.number):
        text = make_request(asked.seed, index)
        if asked.keep:
            asked.keep.mkdir(parents=True, exist_ok=True)
            (asked.keep / f"random_{asked.seed}_{index}.toml").write_text(text)
        outcome, found = try_one(text, index)
        if found is not None and found.is_met and left > 0:
            left -= 1
            try:
                outcome.worst, which = rate_simulation(found)
                outcome.note += f"; simulated: {outcome.worst:.2f} of what is allowed ({which})"
            except Exception as error:
                traceback.print_exc()
                outcome.verdict = "RAISED"
                outcome.note += f"; simulating it: {type(error).__name__}: {error}"
        outcomes.append(outcome)
        print(
            f"{index:4d}  {outcome.verdict:8}{outcome.seconds:7.1f} s  {outcome.note}", flush=True
        )
    return summarise(outcomes)


def summarise(outcomes: list[Outcome]) -> int:
    """Count the verdicts; return the exit code."""
    for verdict in dict.fromkeys(one.verdict for one in outcomes):
        print(f"{verdict}: {sum(one.verdict == verdict for one in outcomes)}")
    times = sorted(one.seconds for one in outcomes)
    print(f"CPU: median {times[len(times) // 2]:.1f} s, longest {times[-1]:.1f} s")
    rated = [one.worst for one in outcomes if one.worst is not None]
    if rated:
        print(f"simulated: {len(rated)}, worst {max(rated):.2f} of what is allowed")
    raised = any(one.verdict == "RAISED" for one in outcomes)
    return int(raised or any(not worst <= 1.0 for worst in rated))


if __name__ == "__main__":
    sys.exit(main())
