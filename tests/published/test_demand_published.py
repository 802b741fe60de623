"""Closed forms, margins and demands against values from outside the project."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest

from gmid.filters import AmplifierModel, FilterSpec, Section, realise
from gmid.filters.closed_forms import (
    Stage,
    find_margin,
    find_pole_ratio,
    shift_of_stages,
    shift_of_voltage_amplifiers,
)
from gmid.filters.demand_loads import find_loads
from gmid.filters.demand_margins import find_margins
from gmid.filters.demand_ports import Ports, Reciprocals
from gmid.filters.distortion import estimate_third_harmonic
from gmid.network import find_poles


@dataclass(frozen=True)
class Case:
    """One published value: where it stands, what it says, how close we must come and why."""

    citation: str
    locator: str
    given: dict[str, float]
    value: float
    tolerance: float
    why: str

    def __str__(self) -> str:
        return f"{self.locator}: {self.value:g}"


QUALITY = [
    Case("J. Tow 1968 and L. C. Thomas 1971 (from memory), Q/(1 - 2 Q w0/wt)",
         "two-integrator loop without the inverter, Q = 10, wt/w0 = 200 [-]",
         {"amplifiers": 2.0}, 11.111, 5e-4, "half a unit of the last digit given"),
    Case("J. Tow 1968 and L. C. Thomas 1971 (from memory), Q/(1 - 4 Q w0/wt)",
         "three-amplifier two-integrator loop, Q = 10, wt/w0 = 200 [-]",
         {"amplifiers": 3.0}, 12.5, 1e-9, "the same closed form: the inverter of noise gain 2 "
         "lags by 2 w0/wt, as much as both integrators"),
]  # fmt: skip

MARGINS = [
    Case("H. W. Bode, Network analysis and feedback amplifier design, 1945",
         f"second pole at {ratio} times the loop bandwidth [deg]", {"ratio": ratio}, margin, 0.05,
         "half a unit of the last digit given")
    for ratio, margin in ((1.0, 51.8), (1.5, 60.0), (2.0, 65.5), (3.0, 72.4))
]  # fmt: skip

PHASE = Case("M. S. Ghausi, K. R. Laker, Modern filter design (from memory)",
             "phase error of an integrator of gain A0 at its unity-gain frequency, 1/A0 [rad]",
             {"gain": 1000.0}, 1e-3, 1e-12, "the closed form is first order in 1/A0")  # fmt: skip

SENSITIVITIES = [
    Case("M. S. Ghausi, K. R. Laker, Modern filter design (from memory)",
         f"sensitivity of {what} to {element} [-]", {"w0": w0, "q": q}, value, 2e-3,
         "second order of a finite step of 0.1 %")
    for what, element, w0, q, value in (
        ("w0", "C1_a", 1.0, 0.0, -0.5), ("w0", "C1_b", 1.0, 0.0, -0.5),
        ("w0", "R1_ab", 1.0, 0.0, -0.5), ("w0", "R1_ba", 1.0, 0.0, -0.5),
        ("Q", "C1_a", 0.0, 1.0, -0.5), ("Q", "C1_b", 0.0, 1.0, 0.5),
        ("Q", "R1_ab", 0.0, 1.0, -0.5), ("Q", "R1_ba", 0.0, 1.0, -0.5),
        ("Q", "R1_q", 0.0, 1.0, 1.0),
    )
]  # fmt: skip

TANH = Case("Taylor series of the hyperbolic tangent, x - x^3/3; sin^3 has a quarter at 3 w",
            "third harmonic of a pair in weak inversion, x^2/12 at x = 0.1 [-]",
            {"x": 0.1}, 0.1**2 / 12, 1e-9, "exact to the order used")  # fmt: skip


@pytest.mark.parametrize("case", QUALITY, ids=str)
def test_quality_of_a_loop(case):
    # each of two integrators lags by w0/wt, an inverter by 2 w0/wt
    bandwidth = 200.0 if case.given["amplifiers"] == 2 else 100.0
    found = shift_of_voltage_amplifiers(1.0, 10.0, gain=np.inf, bandwidth=bandwidth)
    assert float(found.shifted_q) == pytest.approx(case.value, rel=case.tolerance)


def test_quality_of_a_loop_of_transconductors():
    """Transconductors that see no load but their feedback lag by w0 C/gm: w0/wt with wt = gm/C."""
    c, w0 = 1e-12, 1e6
    stage = Stage(200.0 * w0 * c, c)
    found = shift_of_stages(w0, 10.0, [stage, stage])
    assert float(found.shifted_q) == pytest.approx(QUALITY[0].value, rel=QUALITY[0].tolerance)


@pytest.mark.parametrize("case", MARGINS, ids=str)
def test_margin_of_a_second_pole(case):
    assert float(find_margin(case.given["ratio"])) == pytest.approx(case.value, abs=case.tolerance)
    ratio = float(find_pole_ratio(case.value))
    assert ratio == pytest.approx(case.given["ratio"], rel=5e-3)


@pytest.mark.parametrize("case", MARGINS, ids=str)
def test_margin_of_an_amplifier_in_its_filter(case):
    """The loop of an integrator's amplifier far above w0 is a two-pole loop."""
    spec = FilterSpec(response="butterworth", order=1, edge=10.0, load_capacitance=1e-12)
    made = realise(spec, capacitor=1e-9)
    loads = find_loads(made)
    gm = 1e-3
    speed = gm * loads[0].beta / loads[0].stability_capacitance / (2 * np.pi)
    model = AmplifierModel(gm_total=gm, excess_pole=case.given["ratio"] * speed)
    found = find_margins(Ports(made), Reciprocals.of(model), loads)
    assert float(found[0]) == pytest.approx(case.value, abs=case.tolerance)


def test_phase_error_of_an_integrator():
    """``sum G = w0 C`` at the virtual ground and a loaded gain of A0."""
    gm, c, w0 = 1e-3, 1e-12, 1e6
    stage = Stage(gm, c, load_conductance=gm / PHASE.given["gain"], ground_conductance=w0 * c)
    lag = float(stage.find_error(w0)[1]) - w0 * c / gm
    assert -lag == pytest.approx(PHASE.value, abs=PHASE.tolerance)


@pytest.mark.parametrize("case", SENSITIVITIES, ids=str)
def test_sensitivities_of_a_two_integrator_loop(case):
    spec = FilterSpec(response="sections", sections=(Section(1e6, 8.0, k0=1.0),), edge=1e6)
    made = realise(spec, capacitor=2e-12)
    element = case.locator.split(" to ")[1].split(" ")[0]
    factors = {element: np.array([0.999, 1.001])}
    poles = find_poles(made.network(factors=factors))[:, -1]
    size = np.abs(poles)
    measured = size if case.given["w0"] else size / (-2 * poles.real)
    slope = np.log(measured[1] / measured[0]) / np.log(1.001 / 0.999)
    assert slope == pytest.approx(case.value, abs=case.tolerance)


def test_third_harmonic_of_a_pair():
    spec = FilterSpec(response="butterworth", order=1, edge=1e9, style="gm-c")
    made = realise(spec, capacitor=1e-15)
    gms = [made.find(str(place.element)).value for place in made.amplifiers]
    real = Reciprocals.of(*[AmplifierModel(gm_total=gm) for gm in gms])
    x, half = TANH.given["x"], 0.01
    largest = np.array([gms[0] * half / x, 1e3])
    found = estimate_third_harmonic(
        Ports(made), real, largest, frequency=1.0, amplitude=2 * half, divisor=12.0
    )
    assert found.ratio == pytest.approx(TANH.value, abs=TANH.tolerance)
