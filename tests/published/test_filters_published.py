"""Filters against values from outside the project."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from scipy import constants

from gmid.filters import (
    FilterSpec,
    Section,
    design_sections,
    find_response,
    measure_noise,
    realise,
)
from gmid.filters.responses import RationalResponse, find_stop_edge
from gmid.network import Transfer, find_peak, find_poles, transfer


@dataclass(frozen=True)
class Case:
    """Published values: where they stand, what they say, how close we must come and why."""

    citation: str
    locator: str
    given: dict
    values: tuple[float, ...]
    tolerance: float
    why: str

    def __str__(self) -> str:
        return self.locator


DIGITS5, DIGITS6 = "half a unit of the fifth decimal given", "half a unit of the sixth decimal"
CLOSED = "closed form"
TABLES = "filter tables (from memory)"
MATTHAEI = "G. Matthaei, L. Young, E. Jones, Microwave filters, 1964 (from memory)"
THOMSON = "W. Thomson, Proc. IEE 96, 1949; Bessel filter tables (from memory)"
BUTTERWORTH = "S. Butterworth, Wireless Engineer 7, 1930"
GHAUSI = "M. Ghausi, K. Laker, Modern filter design, 1981 (from memory)"


def unit(response: str, order: int, **given) -> RationalResponse:
    """Return a response with its edge at 1 rad/s."""
    edge = 1 / (2 * np.pi)
    return find_response(FilterSpec(response=response, order=order, edge=edge, **given))


def sections_of(response: str, order: int, **given) -> list[Section]:
    edge = 1 / (2 * np.pi)
    spec = FilterSpec(response=response, order=order, edge=edge, **given)
    return sorted(design_sections(spec), key=lambda section: section.q or 0.0)


QUALITY = [
    Case(BUTTERWORTH, f"Butterworth section Q, order {order}", {"order": order}, values, 0.5e-5,
         DIGITS5)
    for order, values in (
        (2, (0.70711,)), (3, (1.0,)), (4, (0.54120, 1.30656)), (5, (0.61803, 1.61803)),
        (6, (0.51764, 0.70711, 1.93185)),
    )
]  # fmt: skip


@pytest.mark.parametrize("case", QUALITY, ids=str)
def test_butterworth_quality_factors(case):
    found = [s.q for s in sections_of("butterworth", case.given["order"]) if s.q is not None]
    assert found == pytest.approx(case.values, abs=case.tolerance)


POLES = [
    Case(TABLES, "Chebyshev 0.5 dB poles, order 3", {"response": "chebyshev", "order": 3,
         "ripple_db": 0.5}, (-0.626456, 0.0, -0.313228, 1.021927), 0.5e-6, DIGITS6),
    Case(TABLES, "Chebyshev 0.5 dB poles, order 5", {"response": "chebyshev", "order": 5,
         "ripple_db": 0.5}, (-0.362320, 0.0, -0.293123, 0.625177, -0.111963, 1.011557), 0.5e-6,
         DIGITS6),
    Case(THOMSON, "Bessel poles of unit delay, order 3", {"response": "bessel", "order": 3,
         "scale": 1.75567}, (-2.32219, 0.0, -1.83891, 1.75438), 1.2e-5,
         "the digits of the poles and of the 3 dB point they are scaled with"),
]  # fmt: skip


@pytest.mark.parametrize("case", POLES, ids=str)
def test_pole_tables(case):
    given = dict(case.given)
    scale = given.pop("scale", 1.0)
    poles = unit(**given).poles * scale
    upper = sorted((p for p in poles if p.imag > -1e-12), key=lambda p: p.real)
    found = [part for pole in upper for part in (pole.real, abs(pole.imag))]
    assert found == pytest.approx(case.values, abs=case.tolerance)


def test_chebyshev_sections():
    """Filter tables (from memory): order 5, 0.5 dB, (w0, Q) of the pairs and the real pole."""
    real, low, high = sections_of("chebyshev", 5, ripple_db=0.5)
    assert (low.w0, low.q) == pytest.approx((0.69048, 1.17781), abs=0.5e-5)
    assert (high.w0, high.q) == pytest.approx((1.01773, 4.54496), abs=0.5e-5)
    assert real.w0 == pytest.approx(0.362320, abs=0.5e-6)


@pytest.mark.parametrize(("ripple", "factor"), [(0.5, 0.349311), (1.0, 0.508847), (3.0, 0.997628)])
def test_chebyshev_ripple_factor(ripple, factor):
    """Definition: the gain at the edge is ``1/sqrt(1 + eps^2)``."""
    found = abs(unit("chebyshev", 4, ripple_db=ripple)(1 / (2 * np.pi)))
    assert np.sqrt(1 / found**2 - 1) == pytest.approx(factor, abs=0.5e-6)


LADDERS = [
    Case("A. Zverev, Handbook of filter synthesis, 1967 (from memory)", "Butterworth g, order 5",
         {"response": "butterworth", "order": 5}, (0.61803, 1.61803, 2.0, 1.61803, 0.61803, 1.0),
         2e-5, "five decimals of g"),
    *(Case(MATTHAEI, f"Chebyshev g, {ripple} dB, order {len(g) - 1}",
           {"response": "chebyshev", "order": len(g) - 1, "ripple_db": ripple}, g, tolerance,
           "the decimals of g, times the sensitivity of a doubly terminated ladder")
      for ripple, g, tolerance in (
          (0.5, (1.40289, 0.70708, 1.98406), 2e-5),
          (0.5, (1.59628, 1.09669, 1.59628, 1.0), 2e-5),
          (0.5, (1.70577, 1.22963, 2.54083, 1.22963, 1.70577, 1.0), 2e-5),
          (1.0, (2.0236, 0.9941, 2.0236, 1.0), 2e-4),
          (1.0, (2.1349, 1.0911, 3.0009, 1.0911, 2.1349, 1.0), 2e-4),
      )),
]  # fmt: skip


def ladder_gain(g: tuple[float, ...], w: np.ndarray) -> np.ndarray:
    """Transducer gain of a ladder of unit source: shunt C first, load as the table gives it."""
    *reactive, load = g
    voltage, current = np.ones(w.shape, dtype=complex), np.full(w.shape, 1 / load, dtype=complex)
    for k in reversed(range(len(reactive))):
        if k % 2:
            voltage = voltage + 1j * w * reactive[k] * current
        else:
            current = current + 1j * w * reactive[k] * voltage
    return np.sqrt(4 / load) / np.abs(voltage + current)


@pytest.mark.parametrize("case", LADDERS, ids=str)
def test_ladder_elements_give_the_response(case):
    *reactive, last = case.values
    # an even ladder ends in a series element, and its last g is then a conductance
    load = last if len(reactive) % 2 else 1 / last
    w = np.linspace(0.01, 2.0, 200)
    found = ladder_gain((*reactive, load), w)
    wanted = np.abs(unit(**case.given)(w / (2 * np.pi)))
    assert found == pytest.approx(wanted, abs=case.tolerance)


@pytest.mark.parametrize(("times", "attenuation"), [(2.0, 42.0387), (3.0, 61.3988)])
def test_chebyshev_attenuation(times, attenuation):
    """Closed form: 0.5 dB, order 5, by nodal analysis of the realisation."""
    spec = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5)
    made = realise(spec, capacitor=2e-12)
    found = transfer(made.network(), "vin", made.output, [times * 400e3])[0]
    assert -20 * np.log10(abs(found)) == pytest.approx(attenuation, abs=0.5e-4)


BANDWIDTHS = [(1, 1.570796), (2, 1.110721), (3, 1.047198), (4, 1.026172), (5, 1.016641)]


@pytest.mark.parametrize(("order", "ratio"), BANDWIDTHS)
def test_butterworth_noise_bandwidth(order, ratio):
    """Closed form ``(pi/2n)/sin(pi/2n)``: white noise at the input, integrated at the output."""
    spec = FilterSpec(response="butterworth", order=order, edge=1e6, source_resistance=1e-3)
    made = realise(spec, capacitor=2e-12)
    shares = measure_noise(made, (0.0, np.inf), temperature=26.85).shares
    white = 2 * 4 * constants.k * 300.0 * 1e-3
    assert float(shares["source.r"]) / white / 1e6 == pytest.approx(ratio, abs=1e-5)


@pytest.mark.parametrize(("kelvin", "rms"), [(300.0, 64.358e-6), (290.0, 63.276e-6)])
def test_kt_over_c(kelvin, rms):
    """H. Nyquist, Phys. Rev. 32, 1928: the damping resistor of an integrator of 1 pF."""
    made = realise(FilterSpec(response="butterworth", order=1, edge=1e6), capacitor=1e-12)
    found = measure_noise(made, (0.0, np.inf), temperature=kelvin - 273.15)
    assert np.sqrt(found.shares["R1_f"] / 2) == pytest.approx(rms, abs=0.5e-9)


BESSEL = [(2, 1.36165), (3, 1.75567), (4, 2.11392), (5, 2.42741)]


@pytest.mark.parametrize(("order", "corner"), BESSEL)
def test_bessel_corner_of_unit_delay(order, corner):
    """W. Thomson, Proc. IEE 96, 1949; Bessel tables (from memory)."""
    poles = unit("bessel", order).poles
    assert float(np.sum(-1 / poles).real) == pytest.approx(corner, abs=0.5e-5)


ELLIPTIC = [
    Case("textbook table (from memory)", "elliptic 0.5 dB, stop edge 1.5, order 3",
         {"order": 3, "attenuation_db": 21.92}, (0.31410, 2.806, 0.76695, 0.45285, 1.14917), 5e-4,
         "the attenuation is given to 0.01 dB"),
    Case("textbook table (from memory)", "elliptic 0.5 dB, stop edge 1.5, order 2",
         {"order": 2, "attenuation_db": 8.28}, (0.38541, 3.927, 0.0, 1.03153, 1.60319), 1e-3,
         "the attenuation is given to 0.01 dB"),
]  # fmt: skip


@pytest.mark.parametrize("case", ELLIPTIC, ids=str)
def test_elliptic_tables(case):
    found = unit("elliptic", ripple_db=0.5, **case.given)
    zero = float(np.abs(found.zeros[0]) ** 2)
    pair = [p for p in found.poles if abs(p.imag) > 1e-9]
    real = [-p.real for p in found.poles if abs(p.imag) <= 1e-9]
    values = (found.gain, zero, sum(real), float(-2 * pair[0].real), float(abs(pair[0]) ** 2))
    assert values == pytest.approx(case.values, rel=case.tolerance, abs=1e-12)
    spec = FilterSpec(response="elliptic", edge=1.0, ripple_db=0.5, **case.given)
    assert find_stop_edge(spec, case.given["order"]) == pytest.approx(1.5, abs=1e-3)


SENSITIVITIES = [
    ("C1_a", -0.5, -0.5), ("C1_b", -0.5, 0.5), ("R1_ab", -0.5, -0.5), ("R1_ba", -0.5, -0.5),
    ("R1_q", 0.0, 1.0),
]  # fmt: skip


@pytest.mark.parametrize(("element", "of_w0", "of_q"), SENSITIVITIES)
def test_two_integrator_sensitivities(element, of_w0, of_q):
    """M. Ghausi, K. Laker (from memory); a resistor has the opposite of its conductance."""
    made = realise(
        FilterSpec(response="sections", sections=(Section(1e6, 5.0, k0=1.0),)), capacitor=1e-12
    )
    step = 1e-4
    factors = {element: [1 - step, 1 + step]}
    poles = find_poles(made.network(factors=factors))
    poles = np.array([next(p for p in row if p.imag > 0) for row in poles])
    w0 = np.abs(poles)
    q = w0 / (-2 * poles.real)
    assert np.diff(np.log(w0))[0] / (2 * step) == pytest.approx(of_w0, abs=1e-4)
    assert np.diff(np.log(q))[0] / (2 * step) == pytest.approx(of_q, abs=1e-4)


@pytest.mark.parametrize(("q", "peak", "place"), [(1.0, 1.15470, None), (4.545, 4.57275, 0.98782)])
def test_lowpass_peak(q, peak, place):
    """Closed form ``Q/sqrt(1 - 1/(4 Q^2))`` at ``w0 sqrt(1 - 1/(2 Q^2))``."""
    made = realise(
        FilterSpec(response="sections", sections=(Section(1e6, q, k0=1.0),)), capacitor=1e-12
    )
    where, size = find_peak(Transfer(made.network(), "vin", made.output), band=(1e5, 1e7))
    assert float(size) == pytest.approx(peak, abs=0.5e-5)
    if place is not None:
        assert float(where) / 1e6 == pytest.approx(place, abs=1e-5)


def test_gm_c_integrator():
    """Definition: the unity-gain frequency of an integrator of gm and C is ``gm/(2 pi C)``."""
    spec = FilterSpec(response="butterworth", order=1, edge=1e6, style="gm-c")
    made = realise(spec, capacitor=1e-12)
    gm, total = made.find("G1_in_a").value, made.find("C1_a").value
    assert gm / (2 * np.pi * total) == pytest.approx(1e6, rel=1e-12)
    fast = transfer(made.network(), "vin", made.output, [1e9])[0]
    assert abs(fast) == pytest.approx(gm / (2 * np.pi * 1e9 * total), rel=1e-5)
