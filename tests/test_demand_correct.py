"""Elements corrected for the nominal amplifier: poles back in place, corners kept."""

from __future__ import annotations

import numpy as np
import pytest

from gmid.errors import DataFault, NoSolution
from gmid.filters import (
    AmplifierModel,
    FilterSpec,
    Tolerance,
    cascade_response,
    check_filter,
    demands_of,
    realise,
)
from gmid.filters.demand_correct import correct_elements
from gmid.network import find_poles, transfer

SPEC = FilterSpec(response="chebyshev", order=5, edge=400e3, ripple_db=0.5, capacitor=4e-12,
                  load_capacitance=0.5e-12, load_resistance=1e6)  # fmt: skip
HIGHPASS = FilterSpec(response="butterworth", kind="highpass", order=3, edge=400e3,
                      capacitor=4e-12)  # fmt: skip
TUNED = Tolerance(passband_db=0.2, counts="tuned-shape")


@pytest.mark.parametrize("gm", [3e-4, 3e-3])
def test_poles_are_those_of_the_sections(gm):
    made = realise(SPEC)
    model = AmplifierModel(gm_total=gm, output_conductance=gm / 300, excess_pole=1e9)
    models = {place.name: model for place in made.amplifiers}
    better = correct_elements(made, models, reference=1e3)
    poles = find_poles(better.network(models))
    for section in made.sections:
        for pole in section.poles:
            assert np.abs(poles - pole).min() < 1e-6 * abs(pole)
    gain = transfer(better.network(models), "vin", better.output, [1e3])
    wanted = cascade_response(made.sections, np.array([1e3]))
    assert abs(gain[0]) == pytest.approx(abs(wanted[0]), rel=1e-6)


def test_hopeless_amplifiers_are_refused():
    made = realise(SPEC)
    model = AmplifierModel(gm_total=2e-5, output_conductance=2e-5)
    with pytest.raises(NoSolution):
        correct_elements(made, {place.name: model for place in made.amplifiers})


@pytest.mark.parametrize(
    ("spec", "tolerance"),
    [(SPEC, TUNED), (HIGHPASS, Tolerance(passband_db=0.2, counts="shape"))],
    ids=["lowpass", "highpass"],
)
def test_correction_saves_gm_and_keeps_the_corners(spec, tolerance):
    plain = demands_of(spec, tolerance)
    found = demands_of(spec.with_values(correct_elements="nominal"), tolerance)
    assert found.gm_sum < 0.75 * plain.gm_sum
    names = [place.name for place in found.realisation.amplifiers]

    def use(u: float) -> dict[str, float]:
        corners = found.point.family.list_corners(u, found.point.v)
        return {
            corner: float(check_filter(
                found, dict(zip(names, real.models(), strict=True)), dense=True
            ).deviation.usage)
            for corner, real in corners.items()
        }  # fmt: skip

    used = use(found.point.u)
    assert max(used, key=used.__getitem__) == found.point.corner
    assert 0.97 <= used[found.point.corner] <= 1.001
    # amplifiers 5 % off the nominal ones, either way, break it
    assert max(max(use(1.05 * found.point.u).values()), max(use(found.point.u / 1.05).values())) > 1
    assert "corrected for" in found.demands[0]["gm_total"].because


def test_savings_are_those_of_another_analysis():
    """2.90 mS and about a fifth of it, for this filter, 4 pF, 0.2 dB, by independent analysis."""
    plain = demands_of(SPEC, TUNED).gm_sum
    assert plain == pytest.approx(2.90e-3, rel=0.15)
    found = demands_of(SPEC.with_values(correct_elements="nominal"), TUNED)
    assert 0.15 * plain < found.gm_sum < 0.25 * plain


def test_gm_c_is_refused():
    spec = FilterSpec(response="bessel", order=2, edge=1e6, style="gm-c", capacitor=2e-12,
                      correct_elements="nominal")  # fmt: skip
    with pytest.raises(DataFault) as told:
        demands_of(spec, TUNED)
    assert told.value.where == "filter.correct_elements"
