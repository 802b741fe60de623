"""The pair of a transconductor made smaller, until the filter's transconductance is all it has.

A search takes transconductance beyond what is asked where it costs no current. In a gm-c filter
it is not for nothing: capacitors and currents grow with it, and the pair is less linear.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from gmid.amplifier.plan import AmplifierPlan, Choices, Supply
from gmid.amplifier.predicting import predict
from gmid.device.device import Device
from gmid.errors import GmidError

LEAST_SCALE = 0.7
"""By which a gm-c filter is scaled down at most for a pair that is more linear [-]."""

_LENGTHS = 4  # longer ones than the pair has, at most
_TRIED = 8


def list_smaller_pairs(
    plan: AmplifierPlan, devices: Mapping[str, Device], supply: Supply, choices: Choices, *,
    wanted: float,
) -> list[tuple[AmplifierPlan, float]]:  # fmt: skip
    """List plans with a smaller pair, and with about a transconductance.

    Parameters
    ----------
    plan : AmplifierPlan
        The amplifier.
    devices : mapping of str to Device
        Of the nominal condition.
    supply : Supply
        What it is fed with; its middle counts.
    choices : Choices
        Its lengths and whether counts are even.
    wanted : float
        gm_total [S].

    Returns
    -------
    list of (AmplifierPlan, float)
        The nearest first, a few at most, each with its gm_total over what is wanted; the filter
        can be scaled to it.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> found = list_smaller_pairs(example_plan(), example_devices(), example_supply(), Choices(),
    ...                            wanted=300e-6)
    >>> plan, scale = found[0]
    >>> bool(plan.transistors["pair"].length > example_plan().transistors["pair"].length)
    True
    """
    pair = plan.transistors["pair"]
    step = 2 if choices.even_counts else 1
    counts = range(step, int(np.asarray(pair.count)) + 1, step)
    here = float(np.asarray(pair.length))
    known = choices.lengths or tuple(float(one) for one in devices[pair.device].sweep.length)
    lengths = [here, *sorted(one for one in known if one > 1.001 * here)[:_LENGTHS]]
    found = []
    for length in lengths:
        for count in reversed(counts):
            tried = plan.with_place("pair", length=length, count=count)
            scale = _measure(tried, devices, supply) / wanted
            if scale < LEAST_SCALE:
                break
            if length != here or count != counts[-1]:
                found.append((abs(float(np.log(scale))), length, -count, tried, scale))
    ranked = sorted(found, key=lambda entry: entry[:3])
    return [(tried, scale) for *_, tried, scale in ranked[:_TRIED]]


def _measure(plan: AmplifierPlan, devices: Mapping[str, Device], supply: Supply) -> float:
    """Measure gm_total at the middle of the supply; none where there is no bias point [S]."""
    try:
        found = predict(plan, devices, supply, voltage=supply.voltage)
    except GmidError:  # a longer pair may not be biased any more: it is no candidate
        return 0.0
    return float(np.asarray(found.signal.gm_total))
