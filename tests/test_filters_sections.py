"""Sections: pairing, order, equal peaks."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest

from gmid.errors import UsageFault
from gmid.filters import (
    AmplifierModel,
    FilterSpec,
    Section,
    cascade_response,
    design_sections,
    find_response,
    measure_levels,
    measure_noise,
    realise,
)
from gmid.filters.pairing import find_peak_gain, level_sections, pair_sections
from gmid.network import transfer

WIDE = np.geomspace(1e4, 1e8, 401)


def chebyshev(order: int, **given) -> FilterSpec:
    return FilterSpec(response="chebyshev", order=order, edge=400e3, ripple_db=0.5, **given)


@pytest.mark.parametrize(
    "given",
    [{"f0": 0.0}, {"f0": 1e6, "q": -1.0}, {"f0": 1e6, "k2": 1.0}, {"f0": 1e6, "k0": 0.0},
     {"f0": 1e6, "q": 1.0, "k0": float("nan")}],
)  # fmt: skip
def test_impossible_sections(given):
    with pytest.raises(UsageFault):
        Section(**{"k0": 1.0, **given})


def test_roots_of_sections():
    section = Section(1e6, 5.0, k2=0.5, k0=2.0)
    assert np.prod(section.poles).real == pytest.approx(section.w0**2)
    assert np.sum(section.poles).real == pytest.approx(-section.w0 / 5.0)
    assert np.sort(section.zeros.imag) / section.w0 == pytest.approx([-2.0, 2.0])
    slow, fast = Section(1e6, 0.01, k0=1.0).poles
    assert (slow * fast).real == pytest.approx(section.w0**2, rel=1e-14)
    assert (fast / slow).real == pytest.approx(1e-4, rel=1e-3)


def test_response_at_the_ends():
    section = Section(1e6, 2.0, k2=0.25, k1=3.0, k0=-4.0)
    assert section.response([0.0, np.inf]).tolist() == [-4.0, 0.25]


def test_high_q_takes_the_near_zeros():
    spec = FilterSpec(response="elliptic", order=6, edge=1e6, ripple_db=0.5, attenuation_db=50.0)
    paired = pair_sections(find_response(spec))
    zeros = [float(np.abs(section.zeros[0])) for section in paired]
    assert [section.q for section in paired] == sorted((s.q for s in paired), reverse=True)
    assert zeros == sorted(zeros)


def test_zeros_of_a_bandpass_are_spread_evenly():
    spec = FilterSpec(response="butterworth", kind="bandpass", order=5, edge=(1e6, 1.5e6))
    for section in pair_sections(find_response(spec)):
        assert (section.k2, section.k0) == (0.0, 0.0)
        assert section.k1 != 0


def test_real_poles_are_joined():
    """A wide bandpass of odd order has two real poles, which make a section of Q below 1/2."""
    spec = FilterSpec(response="butterworth", kind="bandpass", order=3, edge=(1e5, 1e7))
    paired = pair_sections(find_response(spec))
    assert [section.order for section in paired] == [2, 2, 2]
    assert min(section.q for section in paired) < 0.5
    assert cascade_response(paired, WIDE) == pytest.approx(find_response(spec)(WIDE), rel=1e-9)


@pytest.mark.parametrize("order", [2, 3, 5, 8])
@pytest.mark.parametrize("kind", ["lowpass", "highpass", "bandpass"])
@pytest.mark.parametrize("response", ["chebyshev", "elliptic"])
def test_all_nodes_have_the_same_peak(response, kind, order):
    spec = FilterSpec(
        response=response, kind=kind, order=order, ripple_db=1.0, gain_db=8.0,
        edge=(1e6, 1.4e6) if kind == "bandpass" else 1e6, attenuation_db=40.0,
    )  # fmt: skip
    made = realise(spec, capacitor=1e-12)
    levels = np.array(list(measure_levels(made).values()))
    f = np.linspace(0.9e6, 1.5e6, 20001) if kind == "bandpass" else np.geomspace(1e4, 1e9, 20001)
    peak = max(np.abs(find_response(spec)(f)).max(), abs(find_response(spec)(np.inf)))
    assert levels == pytest.approx(peak, rel=1e-5)


def test_levelling_keeps_the_product():
    sections = pair_sections(find_response(chebyshev(7)))
    levelled = level_sections(sections)
    assert cascade_response(levelled, WIDE) == pytest.approx(
        cascade_response(sections, WIDE), rel=1e-12
    )
    peaks = [find_peak_gain(levelled[: k + 1]) for k in range(len(levelled))]
    assert peaks == pytest.approx([peaks[-1]] * len(peaks), rel=1e-9)


def exact_cost(spec: FilterSpec, sections: tuple[Section, ...]) -> float:
    """Noise power times gm for a given small deviation, by the whole network."""
    made = realise(spec, capacitor=4e-12, sections=sections)
    low, high = spec.passband
    f = np.linspace(low, high, 201)
    ideal = np.abs(transfer(made.network(), "vin", made.output, f))
    real = np.abs(transfer(made.network(AmplifierModel(gm_total=0.1)), "vin", made.output, f))
    return float(measure_noise(made, spec.passband).power) * float(np.abs(real / ideal - 1).max())


@pytest.mark.parametrize("response", ["chebyshev", "elliptic"])
def test_the_chosen_order_is_the_best_of_all(response):
    spec = chebyshev(5).with_values(response=response, attenuation_db=45.0)
    paired = pair_sections(find_response(spec))
    costs = [exact_cost(spec, level_sections(order)) for order in permutations(paired)]
    assert exact_cost(spec, design_sections(spec)) == pytest.approx(min(costs), rel=1e-6)
    assert max(costs) > 2 * min(costs)


def test_an_own_cost_decides():
    spec = chebyshev(6)
    rising = design_sections(spec, cost=lambda order: order[0].q)
    falling = design_sections(spec, cost=lambda order: -order[0].q)
    assert rising[0].q == min(section.q for section in rising)
    assert falling[0].q == max(section.q for section in falling)


def test_many_sections_are_ordered_by_exchange():
    spec = chebyshev(16)
    chosen = design_sections(spec)
    assert len(chosen) == 8
    f = np.linspace(1e3, 4e5, 200)
    assert cascade_response(chosen, f) == pytest.approx(find_response(spec)(f), rel=1e-9)


def test_given_sections_keep_pairing_and_order():
    given = (Section(3e5, 4.0, k0=2.0), Section(1e5, k0=5.0))
    spec = FilterSpec(response="sections", sections=given, gain_db=6.0, edge=4e5)
    chosen = design_sections(spec)
    assert [section.f0 for section in chosen] == [3e5, 1e5]
    assert abs(cascade_response(chosen, 0.0)) == pytest.approx(10**0.3)
