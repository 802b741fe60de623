"""Specifications: what they mean, and what is wrong with them."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from gmid.errors import DataFault, Faults, GmidError, UnknownName
from gmid.filters import FilterSpec, Passives, Section, Tolerance, find_response
from gmid.filters.responses import find_stop_edge

EDGE = 1e6


def places(error: GmidError) -> list[str]:
    faults = error.faults if isinstance(error, Faults) else (error,)
    return [fault.where for fault in faults]


WRONG = [
    ({"response": "chebyshev", "order": 3, "edge": EDGE}, ["filter.ripple"]),
    ({"response": "chebyshev", "order": 3, "edge": EDGE, "ripple_db": 0.0}, ["filter.ripple"]),
    ({"response": "chebyshev", "order": 3, "edge": EDGE, "ripple_db": -1.0}, ["filter.ripple"]),
    ({"response": "chebyshev", "order": 3, "edge": EDGE, "ripple_db": 30.0}, ["filter.ripple"]),
    ({"response": "butterworth", "order": 3, "edge": EDGE, "ripple_db": 1.0}, ["filter.ripple"]),
    ({"response": "butterworth", "order": 3}, ["filter.edge"]),
    ({"response": "butterworth", "order": 3, "kind": "bandpass", "edge": EDGE}, ["filter.edge"]),
    ({"response": "butterworth", "order": 3, "edge": (1e6, 2e6)}, ["filter.edge"]),
    ({"response": "butterworth", "order": 3, "kind": "bandpass", "edge": (2e6, 1e6)},
     ["filter.edge"]),
    ({"response": "butterworth", "order": 3, "edge": -1.0}, ["filter.edge"]),
    ({"response": "butterworth", "order": 0, "edge": EDGE}, ["filter.order"]),
    ({"response": "butterworth", "order": 2.5, "edge": EDGE}, ["filter.order"]),
    ({"response": "butterworth", "order": 99, "edge": EDGE}, ["filter.order"]),
    ({"response": "butterworth", "edge": EDGE}, ["filter.stop_edge", "filter.attenuation"]),
    ({"response": "butterworth", "order": 3, "edge": EDGE, "stop_edge": 2e6},
     ["filter.attenuation"]),
    ({"response": "butterworth", "order": 3, "edge": EDGE, "stop_edge": 0.5e6,
      "attenuation_db": 20.0}, ["filter.stop_edge"]),
    ({"response": "butterworth", "order": 3, "kind": "highpass", "edge": EDGE, "stop_edge": 2e6,
      "attenuation_db": 20.0}, ["filter.stop_edge"]),
    ({"response": "butterworth", "order": 3, "kind": "bandpass", "edge": (1e6, 2e6),
      "stop_edge": (1.1e6, 3e6), "attenuation_db": 20.0}, ["filter.stop_edge"]),
    ({"response": "elliptic", "order": 1, "edge": EDGE, "ripple_db": 1.0, "attenuation_db": 40.0},
     ["filter.order"]),
    ({"response": "elliptic", "order": 3, "edge": EDGE, "ripple_db": 3.0, "attenuation_db": 2.0},
     ["filter.ripple"]),
    ({"response": "inverse-chebyshev", "order": 3, "edge": EDGE, "attenuation_db": 40.0},
     ["filter.ripple", "filter.stop_edge"]),
    ({"response": "sections"}, ["filter.sections"]),
    ({"response": "sections", "order": 2, "sections": (Section(1e6, k0=1.0),)},
     ["filter.order"]),
    ({"response": "sections", "sections": (Section(1e6, k0=1.0),), "numerator": (1.0,)},
     ["filter.sections"]),
    ({"response": "sections", "numerator": (1.0,)}, ["filter.sections"]),
    ({"response": "sections", "numerator": (1.0, 0.0, 0.0), "denominator": (1.0, 1.0)},
     ["filter.numerator"]),
    ({"response": "sections", "numerator": (1.0,), "denominator": (0.0, 1.0)},
     ["filter.denominator"]),
    ({"response": "bessel", "order": 2, "edge": EDGE, "numerator": (1.0,)},
     ["filter.numerator"]),
    ({"response": "bessel", "order": 2, "edge": EDGE, "snr_db": 60.0},
     ["filter.swing", "filter.noise_band"]),
    ({"response": "bessel", "order": 2, "edge": EDGE, "noise_band": (2.0, 1.0)},
     ["filter.noise_band"]),
    ({"response": "bessel", "order": 2, "edge": EDGE, "distortion_db": 40.0},
     ["filter.distortion"]),
    ({"response": "bessel", "order": 2, "edge": EDGE, "capacitor": 1e-13,
      "smallest_capacitor": 1e-12}, ["filter.capacitor"]),
    ({"response": "bessel", "order": 2, "edge": EDGE, "load_capacitance": -1e-12,
      "load_resistance": 0.0, "swing": 0.0},
     ["filter.swing", "filter.load_resistance", "filter.load_capacitance"]),
    ({"response": "bessel", "order": 2, "edge": EDGE, "gain_db": float("inf")}, ["filter.gain"]),
]  # fmt: skip


@pytest.mark.parametrize(("given", "keys"), WRONG)
def test_wrong_values_name_their_keys(given, keys):
    with pytest.raises(GmidError) as caught:
        FilterSpec(**given)
    assert places(caught.value) == keys


@pytest.mark.parametrize(
    ("field", "word", "advice"),
    [("response", "chebychev", "chebyshev"), ("kind", "low-pass", "lowpass"),
     ("style", "active_rc", "active-rc"), ("correct_elements", "nominl", "nominal")],
)  # fmt: skip
def test_unknown_words_get_advice(field, word, advice):
    given = {"response": "bessel", "order": 2, "edge": EDGE, field: word}
    with pytest.raises(UnknownName, match=rf"{field}: .*Did you mean {advice}\?"):
        FilterSpec(**given)


def test_tolerance_and_passives_name_their_keys():
    with pytest.raises(Faults) as caught:
        Tolerance(passband_db=0.0, counts="shapes", delay=-1.0)
    assert places(caught.value) == ["tolerance.counts", "tolerance.passband", "tolerance.delay"]
    with pytest.raises(Faults) as caught:
        Passives(capacitor_spread=1.5, unit_resistor=0.0, bottom_plate=-0.1)
    assert places(caught.value) == [
        "passives.unit_resistor", "passives.bottom_plate", "passives.capacitor_spread",
    ]  # fmt: skip


def mask(kind: str, **given) -> FilterSpec:
    edges = {
        "lowpass": (1e6, 1.7e6), "highpass": (1e6, 0.6e6), "bandpass": ((1e6, 2e6), (0.6e6, 2.7e6)),
    }  # fmt: skip
    edge, stop = edges[kind]
    return FilterSpec(kind=kind, edge=edge, stop_edge=stop, attenuation_db=43.0, **given)


ORDERS = {
    "butterworth": (signal.buttord, 10 * np.log10(2)),
    "chebyshev": (signal.cheb1ord, 0.4),
    "inverse-chebyshev": (signal.cheb2ord, 0.4),
    "elliptic": (signal.ellipord, 0.4),
}


@pytest.mark.parametrize("kind", ["lowpass", "highpass", "bandpass"])
@pytest.mark.parametrize("response", ORDERS)
def test_order_from_the_mask_is_that_of_scipy(response, kind):
    find, ripple = ORDERS[response]
    spec = mask(kind, response=response, ripple_db=None if response == "butterworth" else ripple)
    order, _ = find(spec.edge, spec.stop_edge, ripple, spec.attenuation_db, analog=True)
    found = find_response(spec)
    assert found.order == order
    assert np.all(found.attenuation_db(spec.stop_edge) >= 43.0 - 1e-9)
    with pytest.raises(DataFault, match=f"Order {order} does") as caught:
        find_response(spec.with_values(order=order - 1))
    assert caught.value.where == "filter.order"


def test_bessel_order_is_searched_and_may_not_exist():
    spec = FilterSpec(response="bessel", edge=1e6, stop_edge=4e6, attenuation_db=35.0)
    order = find_response(spec).order
    assert find_response(spec.with_values(order=order)).attenuation_db(4e6) >= 35.0
    with pytest.raises(DataFault):
        find_response(spec.with_values(order=order - 1))
    with pytest.raises(DataFault, match="up to order 20") as caught:
        find_response(spec.with_values(stop_edge=1.2e6))
    assert caught.value.where == "filter.stop_edge"


@pytest.mark.parametrize("kind", ["lowpass", "highpass", "bandpass"])
@pytest.mark.parametrize("order", [2, 3, 6])
def test_what_the_edge_means(kind, order):
    for response, drop in (
        ("butterworth", 10 * np.log10(2)), ("bessel", 10 * np.log10(2)), ("chebyshev", 0.7),
        ("inverse-chebyshev", 0.7), ("elliptic", 0.7),
    ):  # fmt: skip
        far = {"lowpass": 1e9, "highpass": 1e3, "bandpass": (1e3, 1e9)}[kind]
        spec = FilterSpec(
            response=response, kind=kind, order=order, attenuation_db=30.0, stop_edge=far,
            edge=(1e6, 1.5e6) if kind == "bandpass" else 1e6,
            ripple_db=None if response in ("butterworth", "bessel") else 0.7,
        )  # fmt: skip
        found = find_response(spec).attenuation_db(np.atleast_1d(spec.edge))
        assert found == pytest.approx(drop, abs=1e-7), response


def test_stop_edge_of_an_elliptic_response_is_a_result():
    for order, attenuation in ((2, 8.0), (3, 60.0), (5, 25.0), (9, 120.0)):
        spec = FilterSpec(
            response="elliptic", order=order, edge=1e6, ripple_db=0.3, attenuation_db=attenuation
        )
        ratio = find_stop_edge(spec, order)
        found = find_response(spec)
        assert found.attenuation_db(ratio * 1e6) == pytest.approx(attenuation, abs=1e-5)
        beyond = found.attenuation_db(ratio * 1e6 * np.geomspace(1.0, 100.0, 2000))
        assert beyond.min() > attenuation - 1e-5


@pytest.mark.parametrize("kind", ["lowpass", "highpass", "bandpass"])
def test_gain_is_meant_at_dc_centre_or_high_frequency(kind):
    edge = (1e6, 1.3e6) if kind == "bandpass" else 1e6
    spec = FilterSpec(
        response="chebyshev", kind=kind, order=4, edge=edge, ripple_db=1.0, gain_db=6.0
    )
    found = find_response(spec)
    assert abs(found(spec.reference_frequency)) == pytest.approx(10**0.3, rel=1e-12)
    natural = find_response(spec.with_values(gain_db=None))
    assert abs(natural(spec.reference_frequency)) == pytest.approx(10**-0.05, rel=1e-9)


def test_gain_where_the_response_is_zero_is_refused():
    spec = FilterSpec(response="sections", sections=(Section(1e6, 1.0, k1=1.0),), gain_db=0.0)
    with pytest.raises(DataFault) as caught:
        find_response(spec)
    assert caught.value.where == "filter.gain"


def test_coefficients_and_unstable_ones():
    w0 = 2 * np.pi * 1e6
    spec = FilterSpec(
        response="sections", numerator=(0.0, 3.0 * w0**2), denominator=(1.0, w0, w0**2)
    )
    f = np.array([0.0, 0.5e6, 1e6, 3e6])
    wanted = Section(1e6, 1.0, k0=3.0).response(f)
    assert find_response(spec)(f) == pytest.approx(wanted, rel=1e-12)
    with pytest.raises(DataFault, match="not stable") as caught:
        find_response(spec.with_values(denominator=(1.0, -w0, w0**2)))
    assert caught.value.where == "filter.denominator"


def test_passband_and_harmonic_defaults():
    low = FilterSpec(response="bessel", order=2, edge=3e6)
    assert low.passband == (0.0, 3e6)
    assert low.harmonic_frequency == pytest.approx(1e6)
    assert low.harmonic_limit_db is None
    assert low.with_values(style="gm-c").harmonic_limit_db == -40.0
    assert low.with_values(kind="highpass").passband == (3e6, float("inf"))
    band = FilterSpec(response="bessel", kind="bandpass", order=2, edge=[1e6, 4e6])
    assert band.passband == (1e6, 4e6)
    assert band.harmonic_frequency == pytest.approx(2e6)
    bare = FilterSpec(response="sections", sections=[Section(1e6, k0=1.0)])
    with pytest.raises(DataFault, match="passband") as caught:
        _ = bare.passband
    assert caught.value.where == "filter.edge"
