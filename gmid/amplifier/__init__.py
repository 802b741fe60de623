"""Fully differential current-mirror amplifiers: one circuit definition, predictions, netlists.

Examples
--------
>>> from gmid.amplifier.example import example_devices, example_plan, example_supply
>>> predict(example_plan(), example_devices(), example_supply()).settled_error.shape
(3,)
"""

from __future__ import annotations

from gmid.amplifier.decks import write_netlists
from gmid.amplifier.places import PLACES, Place, Variant, list_places
from gmid.amplifier.plan import (
    AmplifierPlan,
    Choices,
    Level,
    Matching,
    Requirement,
    Supply,
    TransistorPlan,
)
from gmid.amplifier.predicting import predict
from gmid.amplifier.prediction import Prediction

__all__ = [
    "PLACES",
    "AmplifierPlan",
    "Choices",
    "Level",
    "Matching",
    "Place",
    "Prediction",
    "Requirement",
    "Supply",
    "TransistorPlan",
    "Variant",
    "list_places",
    "predict",
    "write_netlists",
]
