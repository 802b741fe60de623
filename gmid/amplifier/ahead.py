"""What a review asks of an amplifier, measured on every core before it is asked for."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from operator import attrgetter
from typing import Any

from gmid.amplifier.crew import Crew
from gmid.amplifier.prediction import NOISE_FREQUENCIES, Prediction

Question = tuple[Callable[..., object], tuple[Any, ...]]
"""A function of a prediction, and its further arguments."""


def measure_ahead(found: Sequence[Prediction], margin: float) -> None:
    """Measure what takes long, side by side, and leave it in the predictions.

    Parameters
    ----------
    found : sequence of Prediction
        One a condition, as `predict_each` gives them.
    margin : float
        Headroom that every transistor keeps [V].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict_each
    >>> devices = example_devices()
    >>> bench = [(devices["nmos"].condition, devices)]
    >>> found = predict_each(example_plan(), bench, example_supply())
    >>> measure_ahead(found, 0.05)
    >>> found[0].slew_rate.shape
    (3,)
    """
    if not found or found[0].origin is None:
        return
    whole, _ = found[0].origin
    assert whole.signal is not None  # the others read it, and the bias point's linear networks
    read = attrgetter
    questions: list[Question] = [
        (read("slew_rate"), ()), (Prediction.output_swing, (margin,)), (read("sensing"), ()),
        (Prediction.input_range, (margin,)), (read("settling_time"), ()),
        (Prediction.noise, (NOISE_FREQUENCIES,)), (read("loop_margin"), ()),
        (read("common_mode"), ()),
    ]  # fmt: skip
    with Crew(whole) as crew:
        for answers in crew.run(_measure, questions):
            whole._kept.update(answers)


def _measure(found: Prediction, question: Question) -> dict[tuple[Any, ...], Any]:
    """Answer a question; give all that the prediction keeps from then on."""
    known = set(found._kept)
    measure, arguments = question
    measure(found, *arguments)
    return {key: value for key, value in found._kept.items() if key not in known}
