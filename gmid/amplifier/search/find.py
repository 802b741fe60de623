"""The search itself: forms, starts, exact evaluation, refinement, judgement."""

from __future__ import annotations

import time
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.checks import Check
from gmid.amplifier.plan import AmplifierPlan, Choices, Matching, Requirement, Supply
from gmid.amplifier.search.advice import judge_everywhere, suggest
from gmid.amplifier.search.floor import measure_floor
from gmid.amplifier.search.searcher import Progress, Searcher
from gmid.condition import Condition
from gmid.device.device import Device
from gmid.errors import DataFault

Array = NDArray[np.float64]
Bench = Iterable[tuple[Condition, Mapping[str, Device]]]


@dataclass(frozen=True, eq=False)
class SearchResult:
    """What a search found.

    Parameters
    ----------
    plan : AmplifierPlan
        The plan, or the nearest one.
    met : bool
        Whether every check holds.
    checks : tuple of Check
        All of them, judged in every condition.
    binding : Check
        The one that is missed most, or has the least margin left.
    floor : float
        Supply current below which no plan of this topology can be [A].
    ratio_to_floor : float
        Supply current over the floor [-].
    suggestion : str
        Where something is missed: what binds, where, by how much, and what would help most; empty
        otherwise.
    seconds : float
        Time taken [s].
    """

    plan: AmplifierPlan
    met: bool
    checks: tuple[Check, ...]
    binding: Check
    floor: float
    ratio_to_floor: float
    suggestion: str
    seconds: float

    def __repr__(self) -> str:
        verdict = "met" if self.met else f"missed: {self.binding.name}"
        return f"SearchResult({self.plan!r}, {verdict}, {self.ratio_to_floor:.2f} x floor)"


def find_plan(
    demands: Mapping[str, Requirement], *, load_capacitance: float, load_resistance: float,
    bench: Bench, roles: Mapping[str, str], own_well: Sequence[str] = (), supply: Supply,
    choices: Choices | None = None, matching: Mapping[str, Matching] | None = None,
    name: str = "a1", progress: Progress | None = None,
) -> SearchResult:  # fmt: skip
    """Find the amplifier of least supply current, or area, that meets its demands everywhere.

    Parameters
    ----------
    demands : mapping of str to Requirement
        By name of the check.
    load_capacitance, load_resistance : float
        At each output, to ground [F] and to vcm [ohm].
    bench : iterable of (Condition, mapping of str to Device)
        Every condition with its devices.
    roles : mapping of str to str
        Device by role: `n`, `p`, and optionally `pair`, `follower`, `cascode`.
    own_well : sequence of str
        Devices whose bulk may go to the source.
    supply : Supply
        What the amplifier is fed with.
    choices : Choices, optional
        What may be chosen, and margins to keep.
    matching : mapping of str to Matching, optional
        For a demand on `offset`.
    name : str
        Name of the plan.
    progress : callable, optional
        Called with the share done and what is being done.

    Returns
    -------
    SearchResult
        Also where the demands cannot be met: the nearest plan, with a suggestion.

    Raises
    ------
    DataFault
        If no form of the amplifier can be tried at all.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_supply
    >>> found = find_plan(
    ...     {"gbw": Requirement(5e6)}, load_capacitance=1e-12, load_resistance=1e6,
    ...     bench=[(example_devices()["nmos"].condition, example_devices())],
    ...     roles={"n": "nmos", "p": "pmos"}, supply=example_supply(),
    ...     choices=Choices(input_pair="n", output="plain", common_mode_sense="resistors"),
    ... )
    >>> found.met, [check.name for check in found.checks][0]
    (True, 'gbw')
    """
    begun = time.perf_counter()
    say = _keep_rising(progress or (lambda share, words: None))
    load = (load_capacitance, load_resistance)
    choices = choices or Choices()
    opened = tuple(bench)
    if not opened:
        raise DataFault("there is no condition to size for.")
    search = Searcher(demands, load, opened, roles, own_well, supply, choices, matching or {}, say)
    task = search.task
    refiner, best = search.run()
    say(0.9, "judging in all conditions")
    plan = refiner.space.single(
        best.row, name=name, load_capacitance=load_capacitance, load_resistance=load_resistance,
        demands=task.demands,
    )  # fmt: skip
    checks, largest = judge_everywhere(plan, task, choices, search.matching)
    binding = min(checks, key=lambda check: check.margin)
    met = all(check.met for check in checks)
    suggestion = ""
    if not met:
        suggestion = suggest(refiner, best, task, choices, search.matching, checks, say)
    floor = measure_floor(task, roles)
    say(1.0, "done")
    return SearchResult(
        plan, met, checks, binding, floor, largest / floor, suggestion,
        time.perf_counter() - begun,
    )  # fmt: skip


def _keep_rising(progress: Progress) -> Progress:
    """Never tell a share below one told before; a search may take a step again."""
    told = [0.0]

    def say(share: float, words: str) -> None:
        told[0] = max(told[0], share)
        progress(told[0], words)

    return say
