"""Random sections: the nodal analysis of the elements equals the analytic transfer."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from gmid.filters import (
    FilterSpec,
    Section,
    cascade_response,
    measure_levels,
    realise,
)
from gmid.filters.pairing import find_peak_gain, pair_sections
from gmid.filters.responses import find_response
from gmid.network import find_poles, transfer

coefficients = st.one_of(st.just(0.0), st.floats(0.01, 3.0), st.floats(-3.0, -0.01))
corners = st.floats(1e3, 1e8)
few = settings(max_examples=60, deadline=None)


@st.composite
def first_order(draw) -> Section:
    k1, k0 = draw(coefficients), draw(coefficients)
    assume(k1 or k0)
    return Section(draw(corners), k1=k1, k0=k0)


@st.composite
def second_order(draw) -> Section:
    k2, k1, k0 = draw(coefficients), draw(coefficients), draw(coefficients)
    q = draw(st.floats(0.3, 40.0))
    # a plain gain is no section: its inner node would carry nothing
    assume((k2 or k1 or k0) and abs(k0 - k2) + abs(k0 / q - k1) > 0.01)
    return Section(draw(corners), q, k2, k1, k0)


@st.composite
def cascades(draw) -> tuple[Section, ...]:
    return tuple(draw(st.lists(st.one_of(first_order(), second_order()), min_size=1, max_size=4)))


def analytic(sections: tuple[Section, ...], f: np.ndarray) -> np.ndarray:
    """Evaluate the definition, written out again."""
    total = np.ones(f.shape, dtype=complex)
    for section in sections:
        s = 1j * f / section.f0
        if section.q is None:
            total *= (section.k1 * s + section.k0) / (s + 1)
        else:
            top = section.k2 * s**2 + section.k1 * s + section.k0
            total *= top / (s**2 + s / section.q + 1)
    return total


def around(sections: tuple[Section, ...]) -> np.ndarray:
    places = [section.f0 for section in sections]
    return np.geomspace(min(places) / 100, max(places) * 100, 61)


def given_spec(sections: tuple[Section, ...], style: str = "active-rc") -> FilterSpec:
    return FilterSpec(response="sections", sections=sections, style=style)


@few
@given(cascades(), st.floats(1e-14, 1e-10))
def test_active_rc_is_the_analytic_transfer(sections, capacitor):
    made = realise(given_spec(sections), capacitor=capacitor)
    f = around(sections)
    wanted = analytic(sections, f)
    found = transfer(made.network(), "vin", made.output, f)
    assert np.abs(found - wanted).max() < 1e-9 * np.abs(wanted).max()


@few
@given(cascades())
def test_gm_c_without_feed_in_is_the_analytic_transfer(sections):
    plain = tuple(
        Section(s.f0, s.q, 0.0, 0.0 if s.q is None else s.k1, s.k0 or 1.0) for s in sections
    )
    made = realise(given_spec(plain, "gm-c"), capacitor=1e-12)
    f = around(plain)
    wanted = analytic(plain, f)
    found = transfer(made.network(), "vin", made.output, f)
    assert np.abs(found - wanted).max() < 1e-9 * np.abs(wanted).max()


@few
@given(second_order())
def test_gm_c_feeds_in_up_to_one(section):
    assume(abs(section.k2) <= 1.0)
    made = realise(given_spec((section,), "gm-c"), capacitor=1e-12)
    f = around((section,))
    wanted = analytic((section,), f)
    found = transfer(made.network(), "vin", made.output, f)
    assert np.abs(found - wanted).max() < 1e-9 * np.abs(wanted).max()


@few
@given(cascades())
def test_poles_of_the_network_are_those_of_the_sections(sections):
    f0 = np.array([section.f0 for section in sections])
    assume(len(f0) == 1 or np.min(np.diff(np.sort(np.log(f0)))) > 0.1)
    assume(all(section.q is None or abs(section.q - 0.5) > 0.01 for section in sections))
    found = find_poles(realise(given_spec(sections), capacitor=1e-12).network())
    for pole in np.concatenate([section.poles for section in sections]):
        assert np.abs(found - pole).min() < 1e-6 * abs(pole)


@few
@given(cascades())
def test_all_nodes_reach_the_same_level(sections):
    made = realise(given_spec(sections), capacitor=1e-12)
    levels = np.array(list(measure_levels(made).values()))
    assert levels == pytest.approx(find_peak_gain(sections), rel=1e-3)


@few
@given(cascades())
def test_pairing_keeps_the_response(sections):
    response = find_response(given_spec(sections))
    paired = pair_sections(response)
    f = around(sections)
    wanted = analytic(sections, f)
    assert np.abs(cascade_response(paired, f) - wanted).max() < 1e-8 * np.abs(wanted).max()
    assert sum(section.order == 1 for section in paired) <= 1


@few
@given(second_order(), st.floats(0.01, 100.0))
def test_impedance_scaling_leaves_the_response(section, factor):
    made = realise(given_spec((section,)), capacitor=1e-12)
    f = around((section,))
    assert transfer(made.scaled(factor).network(), "vin", made.output, f) == pytest.approx(
        transfer(made.network(), "vin", made.output, f), rel=1e-9, abs=1e-12
    )
