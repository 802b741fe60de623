"""A plan's netlists in the reference simulator, beside what the tables predict."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from gmid.amplifier.checks import spell_condition
from gmid.amplifier.predicting import predict
from gmid.condition import Condition
from gmid.errors import FileTrouble, UsageFault
from gmid.request.plans import PlanFile, has_filter, read_plan
from gmid.request.process import open_bench
from gmid.simulation import inline_includes
from gmid.simulation.comparison import Comparison, compare_plan
from gmid.simulation.plans import PARTS, simulate_plan

Progress = Callable[[str, int, int], None]

QUICK = ("bias", "open_loop", "common_mode")
"""What a quick run simulates."""

_TEMPERATURE = re.compile(r"^\s*\.options?\b.*\btemp\s*=", re.I | re.M)


@dataclass(frozen=True)
class Compared:
    """The figures of one amplifier in one condition at one supply.

    Parameters
    ----------
    amplifier, condition : str
        Which, and where.
    figures : tuple of Comparison
        Sheet against simulation.

    Examples
    --------
    >>> Compared("a1", "tt/27/1.8", ()).condition
    'tt/27/1.8'
    """

    amplifier: str
    condition: str
    figures: tuple[Comparison, ...]


def read_models(files: Mapping[Condition, str | Path]) -> dict[Condition, str]:
    """Read model files into what the netlists include.

    Parameters
    ----------
    files : mapping of Condition to path
        Model cards of the condition's corner.

    Returns
    -------
    dict of Condition to str
        Text for ``models.inc``, its own includes put in; the temperature is set unless the file
        sets it.

    Raises
    ------
    FileTrouble
        If a file cannot be read.

    Examples
    --------
    >>> read_models({})
    {}
    """
    found = {}
    for condition, file in files.items():
        path = Path(file)
        try:
            text = path.read_text(encoding="utf-8")
        except (OSError, UnicodeDecodeError) as trouble:
            raise FileTrouble(f"cannot be read: {trouble}.", where=str(file)) from None
        text = inline_includes(text, folder=path.parent)
        if not _TEMPERATURE.search(text):
            text = f"{text.rstrip()}\n.options temp={condition.temperature:g}\n"
        found[condition] = text
    return found


def simulate(
    plan: str | Path | PlanFile, models: Mapping[Condition, str], *, supplies: bool = False,
    parts: Sequence[str] = PARTS, progress: Progress | None = None,
) -> Iterator[Compared]:  # fmt: skip
    """Simulate every amplifier of a plan and set each figure beside its prediction.

    Parameters
    ----------
    plan : str, Path or PlanFile
        The plan.
    models : mapping of Condition to str
        Text of ``models.inc``, from `read_models`.
    supplies : bool
        At low and high supply too.
    parts : sequence of str
        What to simulate.
    progress : callable, optional
        Told of each run.

    Yields
    ------
    Compared
        One a condition, amplifier and supply.

    Raises
    ------
    UsageFault
        If the plan does not have a condition.
    MissingExtra
        If the simulator is not installed.

    Examples
    --------
    >>> next(simulate("missing.toml", {}))
    Traceback (most recent call last):
    ...
    gmid.errors.FileTrouble: missing.toml: there is no such file.
    """
    file = plan if isinstance(plan, PlanFile) else read_plan(plan)
    request = file.request
    bench = open_bench(request.process)
    for condition in models:
        if condition not in bench.conditions:
            known = " ".join(str(one) for one in bench.conditions)
            raise UsageFault(f"the plan has no condition {condition}.", hint=f"It has {known}.")
    levels = [request.supply.voltage]
    if supplies:
        levels = list(dict.fromkeys(float(level) for level in request.supply.voltages))
    runs = [
        (condition, one, voltage)
        for condition in models
        for one in file.plans
        for voltage in levels
    ]
    for index, (condition, one, voltage) in enumerate(runs):
        where = spell_condition(condition, voltage)
        if progress:
            progress(f"{one.name} in {where}", index, len(runs))
        devices = bench.devices(condition)
        predicted = predict(one, devices, request.supply, voltage=voltage)
        simulated = simulate_plan(
            one, request.supply, devices, models[condition], voltage=voltage,
            gbw=float(predicted.signal.gbw), parts=parts,
        )  # fmt: skip
        yield Compared(one.name, where, tuple(compare_plan(predicted, simulated)))
    if has_filter(file):
        from gmid.tasks.filter_simulating import compare_filter
        from gmid.tasks.rebuilding import rebuild_filter

        whole = rebuild_filter(file, bench)
        for condition in models:
            for voltage in levels:
                where = spell_condition(condition, voltage)
                if progress:
                    progress(f"filter in {where}", len(runs), len(runs) + 1)
                yield Compared("filter", where, compare_filter(
                    whole, file, bench.devices(condition), models[condition], voltage=voltage,
                    quick="noise" not in parts,
                ))  # fmt: skip
    if progress:
        progress("simulated", len(runs), len(runs))
