"""What limits an amplifier's output in its worst condition: rows for the sheet, and words."""

from __future__ import annotations

from collections.abc import Callable, Iterable

import numpy as np

from gmid.amplifier.checks import spell_condition
from gmid.amplifier.large import BY_GAIN
from gmid.amplifier.prediction import Prediction
from gmid.sheet.data import AmplifierSheet, Limit
from gmid.sheet.words import spell_value

Reader = Callable[[Prediction], np.ndarray]


def find_output_limit(cases: Iterable[Prediction], margin: float) -> Limit:
    """Find the least output swing, and what ends it.

    Parameters
    ----------
    cases : iterable of Prediction
        Every condition.
    margin : float
        Headroom that every transistor keeps [V].

    Returns
    -------
    Limit
        Caused by ``gain`` or by an instance.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_review
    >>> find_output_limit([sample_review().first], 0.05).cause
    'direct_p'
    """
    value, case, index = _find_least(cases, lambda one: one.output_swing(margin).peak)
    cause = str(np.broadcast_to(case.output_swing(margin).limit, case.batch)[index])
    return Limit(value=max(value, 0.0), condition=_spell(case, index), cause=cause)


def find_sense_limit(cases: Iterable[Prediction]) -> Limit | None:
    """Find the least output that the common-mode sensing still follows.

    Parameters
    ----------
    cases : iterable of Prediction
        Every condition.

    Returns
    -------
    Limit or None
        Caused by an instance; None where it follows throughout.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_review
    >>> find_sense_limit([sample_review().first]) is None
    True
    """
    value, case, index = _find_least(cases, lambda one: one.sensing.peak)
    if np.isinf(value):
        return None
    cause = str(case.sensing.starved[index])
    return Limit(value=value, condition=_spell(case, index), cause=cause)


def _find_least(cases: Iterable[Prediction], read: Reader) -> tuple[float, Prediction, int]:
    rows = [(np.broadcast_to(read(one), one.batch), one) for one in cases]
    values, case = min(rows, key=lambda row: float(np.min(row[0])))
    index = int(np.argmin(values))
    return float(values[index]), case, index


def _spell(case: Prediction, index: int) -> str:
    return spell_condition(case.condition, float(case.voltage[index]))


def describe_limits(
    output: Limit | None, sense: Limit | None, *, asked: float | None = None
) -> str:
    """Say what ends the swing and the sensing of the common mode.

    Parameters
    ----------
    output, sense : Limit or None
        Of an amplifier.
    asked : float, optional, keyword-only
        Swing that is asked of it [V].

    Returns
    -------
    str
        A sentence each; empty for none.

    Examples
    --------
    >>> describe_limits(Limit(value=0.7, condition="ss/-40/1.62", cause="gain"), None)
    'Outputs swing to 700 mV at least, in ss/-40/1.62, where the gain has fallen by 3 dB.'
    >>> describe_limits(None, Limit(value=0.2, condition="tt/27/1.8", cause="sense_pair_p"))
    'The common mode is sensed up to 200 mV at least, in tt/27/1.8, where sense_pair_p starves.'
    """
    said = []
    if output is not None:
        end = "the gain has fallen by 3 dB" if output.cause == BY_GAIN else (
            f"{output.cause} comes inside the saturation margin"
        )  # fmt: skip
        said.append(
            f"Outputs swing to {spell_value(output.value, 'V', 3)} at least, "
            f"in {output.condition}, where {end}."
        )
    if sense is not None:
        said.append(
            f"The common mode is sensed up to {spell_value(sense.value, 'V', 3)} at least, "
            f"in {sense.condition}, where {sense.cause} starves"
            f"{_compare(sense.value, asked)}."
        )
    return " ".join(said)


def tell_limits(one: AmplifierSheet) -> str:
    """Say what ends the swing and the sensing of an amplifier, against the swing asked of it.

    Parameters
    ----------
    one : AmplifierSheet
        The amplifier.

    Returns
    -------
    str
        A sentence each.

    Examples
    --------
    >>> from gmid.sheet.sample import sample_amplifier
    >>> tell_limits(sample_amplifier()).startswith("Outputs swing to ")
    True
    """
    asked = one.demands["swing"].value if "swing" in one.demands else None
    return describe_limits(one.output_limit, one.sense_limit, asked=asked)


def _compare(value: float, asked: float | None) -> str:
    if asked is None or value >= asked:
        return ""
    return f": less than the {spell_value(asked, 'V', 3)} asked for"
