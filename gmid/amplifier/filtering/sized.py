"""The base amplifier at hand while a filter is being sized."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from gmid.amplifier.filtering.positions import make_model
from gmid.amplifier.plan import AmplifierPlan
from gmid.amplifier.prediction import Prediction
from gmid.filters.elements import AmplifierModel


@dataclass
class Sized:
    """The amplifier at hand: its base, and what that is in every condition.

    Parameters
    ----------
    base : AmplifierPlan
        Of multiple 1.
    predictions : tuple of Prediction
        By condition.
    suggestion : str
        Of the search, where it missed something.
    floor : float
        Of the search [A].
    asked : dict of str to float
        Demands that it was searched for.
    met : bool
        Whether the search met them.

    Examples
    --------
    >>> [field for field in Sized.__dataclass_fields__][:2]
    ['base', 'predictions']
    """

    base: AmplifierPlan
    predictions: tuple[Prediction, ...]
    suggestion: str
    floor: float
    asked: dict[str, float]
    met: bool

    @cached_property
    def model(self) -> AmplifierModel:
        """Its four parameters and its noise, in every condition."""
        return make_model(self.predictions)

    @property
    def at_nominal(self) -> AmplifierModel:
        """Its model in the first condition at the middle supply."""
        names = ("gm_total", "output_conductance", "output_capacitance", "input_capacitance",
                 "excess_pole", "noise_factor", "noise_corner")  # fmt: skip
        rows = {name: np.asarray(getattr(self.model, name))[0].ravel() for name in names}
        return AmplifierModel(**{name: float(row[row.size // 2]) for name, row in rows.items()})

    @property
    def supply_current(self) -> float:
        """The largest of all conditions [A]."""
        return max(float(np.max(one.supply_current)) for one in self.predictions)

    @property
    def largest_capacitances(self) -> tuple[float, float]:
        """Of output and input, what is built in included [F]."""
        outputs, inputs = (
            float(np.max(np.asarray(getattr(self.model, name))))
            for name in ("output_capacitance", "input_capacitance")
        )
        return outputs, inputs
