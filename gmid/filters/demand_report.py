"""The response of a filter with real amplifiers as a curve, for a sheet or a figure."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from gmid.filters.demand_check import FilterCheck
from gmid.filters.demand_types import FilterDemands
from gmid.network.pencil import FloatArray


@dataclass(frozen=True, eq=False)
class ResponseCurve:
    """The response of a filter in one condition, before tuning, and what is wrong with it.

    Parameters
    ----------
    condition : str
        Name of the condition.
    frequency : ndarray of float, shape (n,)
        [Hz].
    gain_db : ndarray of float, shape (n,)
        [dB].
    deviation_db : ndarray of float, shape (n,)
        From the ideal response, with the flat gain and the shift that the tolerance leaves aside
        taken out; not-a-number outside the passband [dB].
    shift : float
        Relative frequency shift left aside [-].
    tuned : bool
        Whether a shift is left aside.

    Examples
    --------
    >>> ResponseCurve("ideal", np.ones(1), np.zeros(1), np.zeros(1), 0.0, False).condition
    'ideal'
    """

    condition: str
    frequency: FloatArray
    gain_db: FloatArray
    deviation_db: FloatArray
    shift: float
    tuned: bool

    def as_dict(self) -> dict[str, Any]:
        """Return the curve as plain lists.

        Returns
        -------
        dict
            ``condition tuned frequency gain_db deviation_db``; None where there is no deviation.
        """
        deviation = [float(d) if np.isfinite(d) else None for d in self.deviation_db]
        return {
            "condition": self.condition, "tuned": self.tuned,
            "frequency": self.frequency.tolist(), "gain_db": self.gain_db.tolist(),
            "deviation_db": deviation,
        }  # fmt: skip


def trace_response(
    found: FilterDemands, checked: FilterCheck, *, condition: str = "as demanded"
) -> ResponseCurve:
    """Turn a checked filter, without leading axes, into a curve.

    Parameters
    ----------
    found : FilterDemands
        The filter.
    checked : FilterCheck
        With real amplifiers.
    condition : str
        A name for it.

    Returns
    -------
    ResponseCurve
        Over the frequencies at which it was measured.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> from gmid.filters.demand_check import check_filter
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> curve = trace_response(found, check_filter(found, found.models))
    >>> 0.05 < float(np.nanmax(np.abs(curve.deviation_db))) <= 0.2
    True
    """
    stick, deviation = found.plane.fine, checked.deviation
    f, shift = checked.frequency, float(deviation.shift)
    meant = f / (1.0 + shift)
    with np.errstate(divide="ignore"):
        wanted = 20.0 * np.log10(np.abs(stick.ideal(meant)))
    low, high = stick.passband
    inside = (meant >= low * (1 - 1e-9)) & (meant <= high * (1 + 1e-9))
    error = checked.gain_db - float(deviation.gain_db) - wanted
    tuned = deviation.allowance.counts == "tuned-shape"
    return ResponseCurve(
        condition, f, checked.gain_db, np.where(inside, error, np.nan), shift, tuned
    )
