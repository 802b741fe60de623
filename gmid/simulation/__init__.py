"""The optional reference simulator: a deck of text in, named arrays out.

A deck has exactly one analysis line; the class of the result says which analysis it was.
"""

from __future__ import annotations

from gmid.simulation.includes import inline_includes
from gmid.simulation.results import (
    AcResult,
    DcResult,
    NoiseResult,
    OperatingResult,
    Simulation,
    TransientResult,
)
from gmid.simulation.runner import is_available, run_deck

__all__ = [
    "AcResult",
    "DcResult",
    "NoiseResult",
    "OperatingResult",
    "Simulation",
    "TransientResult",
    "inline_includes",
    "is_available",
    "run_deck",
]
