"""Words for what a plan misses, and for what a change of the request leaves of it.

Checks go by the keys of a request, since that is where something is to be changed.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from gmid.amplifier.checks import KINDS, Check
from gmid.quantity import format_quantity

_SLACK, _SLACK_DB, _SLACK_DEGREES = 0.03, 0.3, 2.0
_ALTOGETHER = 0.1
_NAMED = 3


def tell_binding(checks: Sequence[Check]) -> str:
    """Say which check binds, in which condition, by how much, and which others are missed.

    Parameters
    ----------
    checks : sequence of Check
        At least one of them missed.

    Returns
    -------
    str
        One sentence or two.

    Examples
    --------
    >>> tell_binding([Check("dc_gain", 60.0, 55.5, "dB", "ff/125/1.62", -0.4, False),
    ...               Check("gbw", 5e6, 4.9e6, "Hz", "ss/125/1.62", -0.02, False)])
    'dc_gain binds: 55.5 dB of 60 dB in ff/125/1.62, 4.5 dB short. gbw is missed too.'
    """
    first, *rest = sorted((one for one in checks if not one.met), key=lambda one: one.margin)
    facts = f"{first.name} binds: {spell_amount(first)} in {first.condition}, {_spell_gap(first)}."
    names = [one.name for one in rest]
    return f"{facts} {_join(names)} {'are' if names[1:] else 'is'} missed too." if names else facts


def _spell_gap(check: Check) -> str:
    kind, off = KINDS[check.name], abs(check.achieved - check.required)
    word = "short" if kind.is_least else "too much"
    if kind.unit in ("dB", "deg"):
        return f"{off:.3g} {kind.unit} {word}"
    if not kind.is_least and check.achieved > 2 * check.required:
        return f"{check.achieved / check.required:.3g} times as much"
    return f"{100 * off / check.required:.3g} % {word}"


def tell_change(words: str, demand: str, checks: Sequence[Check], left: float) -> str:
    """Say what a change of the request leaves.

    Parameters
    ----------
    words : str
        The change, where its size was fixed beforehand.
    demand : str
        The demand that gave way; empty for another change.
    checks : sequence of Check
        Of the plan found with it, by the request as it was; what gave way may be missed.
    left : float
        Part that is left of what was missed without the change [-].

    Returns
    -------
    str
        One sentence or two.

    Examples
    --------
    >>> checks = [Check("gbw", 5e6, 4.2e6, "Hz", "ss/125/1.62", -0.16, False)]
    >>> tell_change("", "gbw", checks, 0.0)
    'gbw of 4.07 MHz instead of 5 MHz would be enough.'
    >>> tell_change("a supply of 2 V", "", checks, 0.3)
    'No single change is enough. A supply of 2 V helps most: 30 % of what is missed is left (gbw 4.2 MHz of 5 MHz).'
    """  # noqa: E501
    for one in checks if demand else ():
        words = _spell_way(one) if one.name == demand else words
    words = words if words.split()[0] in KINDS else capitalise(words)
    missed = [one for one in checks if not one.met and one.name != demand]
    if not missed:
        return f"{words} would be enough."
    missed.sort(key=lambda one: one.margin)
    named = [f"{one.name} {spell_amount(one)}" for one in missed[:_NAMED]]
    if missed[_NAMED:]:
        named.append(f"and {len(missed) - _NAMED} more")
    return (
        f"No single change is enough. {words} helps most: {_spell_share(left)} of what is missed "
        f"is left ({', '.join(named)})."
    )


def spell_amount(check: Check) -> str:
    """Write what is reached of what is asked, with as many digits as tell them apart.

    Parameters
    ----------
    check : Check
        A check.

    Returns
    -------
    str
        Two figures.

    Examples
    --------
    >>> spell_amount(Check("gbw", 5e6, 4.9996e6, "Hz", "tt/27/1.8", -0.1, False))
    '4.9996 MHz of 5 MHz'
    """
    for digits in (3, 4, 5, 6):
        got, wanted = (_spell(check.name, one, digits) for one in (check.achieved, check.required))
        if got != wanted:
            break
    return f"{got} {'of' if KINDS[check.name].is_least else 'for'} {wanted}"


def capitalise(words: str) -> str:
    """Begin a sentence.

    Parameters
    ----------
    words : str
        Not empty.

    Returns
    -------
    str
        With a capital letter.

    Examples
    --------
    >>> capitalise("half of it")
    'Half of it'
    """
    return words[0].upper() + words[1:]


def _spell_share(left: float) -> str:
    return f"{max(100 * left, 0.1):.2g} %"


def _spell_way(check: Check) -> str:
    """Say how far a demand gives way: a little further than its plan does, three digits of it."""
    kind = KINDS[check.name]
    sign = -1.0 if kind.is_least else 1.0
    slack = {"dB": _SLACK_DB, "deg": _SLACK_DEGREES}.get(kind.unit, _SLACK * abs(check.achieved))
    worst = min(check.achieved, check.required) if kind.is_least else max(
        check.achieved, check.required
    )  # fmt: skip
    value = worst + sign * slack
    share = value / check.required if kind.unit not in ("dB", "deg") else 1.0
    if not np.isfinite(value) or share < _ALTOGETHER or share > 1 / _ALTOGETHER:
        return f"giving up {check.name} (now {_spell(check.name, check.required)})"
    scale = 10.0 ** (np.floor(np.log10(max(abs(value), 1e-30))) - 2)
    value = float(scale * (np.floor if kind.is_least else np.ceil)(value / scale))
    return f"{check.name} of {_spell(check.name, value)} instead of " + _spell(
        check.name, check.required
    )


def _spell(name: str, value: float, digits: int = 3) -> str:
    return format_quantity(value, KINDS[name].unit, digits=digits)


def _join(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
