"""Real amplifiers fed back into the filter: what becomes of the response, the noise, the poles."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from gmid.filters.common_mode import is_stable
from gmid.filters.demand_types import FilterDemands
from gmid.filters.deviation import Deviation, Yardstick
from gmid.filters.elements import AmplifierModel
from gmid.filters.noise import measure_noise
from gmid.network import find_poles, transfer
from gmid.network.pencil import ComplexArray, FloatArray

Models = Mapping[str, AmplifierModel]


@dataclass(frozen=True, eq=False)
class FilterCheck:
    """A filter with real amplifiers, held against the ideal one.

    Parameters
    ----------
    deviation : Deviation
        Of shape (...).
    frequency : ndarray of float, shape (nf,)
        [Hz].
    response : ndarray of complex, shape (..., nf)
        The transfer, as it is before tuning [-].
    snr_db : ndarray of float, shape (...), optional
        Where swing and noise band are known [dB].
    is_stable : bool
        Whether all poles of the signal are in the left half plane.
    is_common_mode_stable : bool, optional
        Likewise for the common mode, where its amplifiers are given.

    Examples
    --------
    >>> FilterCheck.__dataclass_fields__["snr_db"].name
    'snr_db'
    """

    deviation: Deviation
    frequency: FloatArray
    response: ComplexArray
    snr_db: FloatArray | None
    is_stable: bool
    is_common_mode_stable: bool | None

    @property
    def gain_db(self) -> FloatArray:
        """Gain over frequency, shape (..., nf) [dB]."""
        return np.asarray(20.0 * np.log10(np.abs(self.response)))


def check_filter(
    found: FilterDemands, models: Models, *, common_mode: Models | None = None,
    rscale: ArrayLike = 1.0, cscale: ArrayLike = 1.0, temperature: ArrayLike = 27.0,
    dense: bool = False,
) -> FilterCheck:  # fmt: skip
    """Put real amplifiers into a filter and measure it.

    Parameters
    ----------
    found : FilterDemands
        The filter and its tolerance.
    models : mapping of str to AmplifierModel
        By position, with own capacitances, conductances (sense resistors among them), excess
        poles and noise; values may carry leading axes, such as conditions.
    common_mode : mapping of str to AmplifierModel, optional
        What each amplifier is for the common mode.
    rscale, cscale : array_like, shape (...)
        Corner of the resistors, and of the capacitors once tuned [-].
    temperature : array_like, shape (...)
        [degC].
    dense : bool
        2000 points in the passband instead of 240.

    Returns
    -------
    FilterCheck
        Of the batch of all values.

    Examples
    --------
    >>> from gmid.filters import FilterSpec, Tolerance
    >>> from gmid.filters.demand import demands_of
    >>> spec = FilterSpec(response="butterworth", order=2, edge=1e6, capacitor=2e-12)
    >>> found = demands_of(spec, Tolerance(passband_db=0.2, counts="tuned-shape"))
    >>> checked = check_filter(found, found.models)
    >>> bool(checked.deviation.passband_db <= 0.2), checked.is_stable
    (True, True)
    """
    made, spec = found.realisation, found.spec
    stick: Yardstick = found.plane.dense if dense else found.plane.fine
    net = made.network(models, rscale=rscale, cscale=cscale)
    response = transfer(net, "vin", made.output, stick.frequency)
    snr = None
    if spec.swing is not None and spec.noise_band is not None:
        noise = measure_noise(
            made, spec.noise_band, models, temperature=temperature, rscale=rscale, cscale=cscale
        )
        snr = noise.snr_db(spec.swing)
    quiet = None
    if common_mode is not None:
        other = made.network(common_mode, rscale=rscale, cscale=cscale, common_mode=True)
        quiet = is_stable(find_poles(other))
    shown = stick.shown
    return FilterCheck(
        stick.measure(response), stick.frequency[shown], response[..., shown], snr,
        is_stable(find_poles(net)), quiet,
    )  # fmt: skip
