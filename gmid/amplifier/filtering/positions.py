"""Which amplifier stands at which position, and what it is there."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from gmid.amplifier.filtering.circuit import connect_amplifier
from gmid.amplifier.filtering.realised import RealisedFilter
from gmid.amplifier.plan import AmplifierPlan
from gmid.amplifier.prediction import Prediction
from gmid.errors import DataFault
from gmid.filters.elements import AmplifierModel
from gmid.filters.realisation import Realisation
from gmid.network.stamps import BOLTZMANN, ZERO_CELSIUS

Array = NDArray[np.float64]


def place_plans(
    plans: Sequence[AmplifierPlan], realisation: Realisation
) -> dict[str, AmplifierPlan]:
    """Give every position its amplifier.

    Parameters
    ----------
    plans : sequence of AmplifierPlan
        With their positions.
    realisation : Realisation
        The filter.

    Returns
    -------
    dict of str to AmplifierPlan
        In the order of the positions.

    Raises
    ------
    DataFault
        If a position has no amplifier or two, or a plan names one that is not there.

    Examples
    --------
    >>> from dataclasses import replace
    >>> from gmid.amplifier.example import example_plan
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=2, edge=1e6), capacitor=2e-12)
    >>> list(place_plans([replace(example_plan(), positions=("A1", "A2"))], made))
    ['A1', 'A2']
    """
    names = [place.name for place in realisation.amplifiers]
    found: dict[str, AmplifierPlan] = {}
    for plan in plans:
        for name in plan.positions:
            if name not in names or name in found:
                why = "already has an amplifier" if name in found else "is not in the filter"
                raise DataFault(
                    f"position {name} of {plan.name} {why}.", where="plan.positions",
                    hint=f"The filter has {', '.join(names)}, each once.",
                )  # fmt: skip
            found[name] = plan
    missing = [name for name in names if name not in found]
    if missing:
        raise DataFault(
            f"no amplifier stands at {', '.join(missing)}.", where="plan.positions",
            hint="Add the positions to an amplifier.",
        )  # fmt: skip
    return {name: found[name] for name in names}


def measure_transconductances(case: RealisedFilter) -> Array:
    """Measure the short-circuit transconductance of every amplifier where it stands.

    Parameters
    ----------
    case : RealisedFilter
        The filter.

    Returns
    -------
    ndarray, shape (..., K)
        Differential, at DC, in the order of the positions [S].

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.filtering.realised import realise_filter
    >>> from gmid.filters import FilterSpec, realise
    >>> made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=2e-12)
    >>> found = realise_filter(made, {"A1": example_plan()}, example_devices(), example_supply())
    >>> bool((abs(measure_transconductances(found) * 1e6 - 400) < 100).all())
    True
    """
    pencil = case.network().assemble()
    index = {name: k for k, name in enumerate(pencil.unknowns)}
    matrix = pencil.conductance
    rows = []
    made = case.realisation
    for place in made.amplifiers:
        element = None if place.element is None else made.find(place.element)
        ports = connect_amplifier(place, element)
        inside = [k for name, k in index.items() if name.startswith(f"{place.name}_")]
        gate, drain = index[f"{place.input}_p"], index[f"{place.output}_p"]
        sign = 1.0 if ports["vip"].endswith("_p") else -1.0
        # current into the output from what is inside, with both ports held
        moved = np.linalg.solve(
            matrix[..., inside, :][..., inside], matrix[..., inside, gate][..., None]
        )[..., 0]
        rows.append(sign * (matrix[..., drain, inside] * moved).sum(axis=-1))
    return np.stack(rows, axis=-1)


def make_model(found: Sequence[Prediction], multiple: float = 1.0) -> AmplifierModel:
    """Make the four-parameter model of a sized amplifier, conditions and supplies as its axes.

    Parameters
    ----------
    found : sequence of Prediction
        Of one plan, one for each condition.
    multiple : float
        By which its counts are multiplied [-].

    Returns
    -------
    AmplifierModel
        Of shape (conditions, supplies); noise by its density at 10 MHz and at 1 kHz.

    Examples
    --------
    >>> from gmid.amplifier.example import example_devices, example_plan, example_supply
    >>> from gmid.amplifier.predicting import predict
    >>> one = make_model([predict(example_plan(), example_devices(), example_supply())])
    >>> one.gm_total.shape, bool((one.noise_factor > 1).all())
    ((1, 3), True)
    """
    signals = [one.signal for one in found]
    fields = ("gm_total", "output_conductance", "output_capacitance", "input_capacitance",
              "excess_pole")  # fmt: skip
    values = {name: np.stack([getattr(one, name) for one in signals]) for name in fields}
    factors, corners = [], []
    for one in found:
        factor, corner = _find_noise(one)
        factors.append(factor)
        corners.append(corner)
    model = AmplifierModel(
        noise_factor=np.stack(factors), noise_corner=np.stack(corners), **values
    )  # fmt: skip
    return model.scaled(multiple)


def _find_noise(found: Prediction) -> tuple[Array, Array]:
    """Find noise factor and flicker corner, the load's own noise taken off."""
    low, high = 1e3, 1e7
    noise = found.noise([low, high])
    loads = [k for k, owner in enumerate(noise.owners) if owner in ("rlp", "rln")]
    power = noise.power - noise.shares[..., loads].sum(axis=-1)
    assert noise.gain is not None
    density = power / np.abs(noise.gain) ** 2
    kelvin = found.condition.temperature + ZERO_CELSIUS
    # at high frequency the gain of the bench falls but so does the noise: the ratio stays
    white = (high * density[..., 1] - low * density[..., 0]) / (high - low)
    white = np.maximum(white, 0.01 * density[..., 1])
    corner = np.maximum((density[..., 0] / white - 1.0) * low, 0.0)
    factor = white * found.signal.gm_total / (8 * BOLTZMANN * kelvin)
    return np.asarray(factor), np.asarray(corner)


def find_owner(name: str, positions: Mapping[str, AmplifierPlan]) -> str | None:
    """Give the position that a node or element inside an amplifier belongs to.

    Parameters
    ----------
    name : str
        Such as ``A1_pair_p``.
    positions : mapping of str to AmplifierPlan
        Amplifiers by position.

    Returns
    -------
    str or None
        None outside amplifiers.

    Examples
    --------
    >>> find_owner("A1_pair_p", {"A1": None}), find_owner("v1_p", {"A1": None})
    ('A1', None)
    """
    head = name.partition("_")[0]
    return head if head in positions else None
