"""Invented plans of every form, for drawing, and the figures of the example."""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from functools import lru_cache
from types import MappingProxyType

from gmid.amplifier.places import INPUTS, OUTPUTS, PLACES, SENSES, Variant, list_places
from gmid.amplifier.plan import AmplifierPlan, TransistorPlan
from gmid.sheet.plots import draw_figures
from gmid.sheet.sample import sample_review

FORMS = list(itertools.product(INPUTS, OUTPUTS, SENSES))
"""Input pair, output, common-mode sense."""


def make_form(input_pair: str, output: str, sense: str, *, stack: int = 1) -> AmplifierPlan:
    """Make a plan with long numbers everywhere; nothing that would work."""
    transistors = {}
    for index, place in enumerate(list_places(Variant(input_pair, output, sense))):
        device = {"n": "nmos", "p": "pmos"}[PLACES[place].polarity(input_pair)]
        bulk = "source" if place in ("pair", "follower", "error_pair", "sense_pair") else "rail"
        transistors[place] = TransistorPlan(
            device, 0.25e-6 + index * 0.05e-6, 20 + index, stack=stack, bulk=bulk
        )
    return AmplifierPlan(
        "a1", transistors, load_capacitance=1e-12, load_resistance=150e3, input_pair=input_pair,
        output=output, common_mode_sense=sense,
    )  # fmt: skip


@lru_cache(maxsize=1)
def sample_figures() -> Mapping[str, str]:
    """Draw the example amplifier, once for all tests."""
    return MappingProxyType(draw_figures(sample_review()))
