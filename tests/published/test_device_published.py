"""Device queries against closed formulas of the literature, on tables of those formulas."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import lambertw

from builders import UT, Grid, ekv, rows, square_law
from gmid.condition import Condition
from gmid.device import Device
from gmid.sweep.model import Sweep, UnitTransistor

WIDTH = 2e-6


def charge_ekv(length, vsb, vds, vgs, *, n=1.3, vt0=0.42, spec=0.6e-6):
    """EKV in inversion charges: 2 q + ln q = v, i = q^2 + q at each end; gm follows q alone."""
    pinch = (vgs + vsb - vt0) / n - vsb
    forward, reverse = (0.5 * lambertw(2 * np.exp(v / UT)).real for v in (pinch, pinch - vds))
    current = spec * WIDTH / length
    gm = current * (forward - reverse) / (n * UT)
    total = current * (forward**2 + forward - reverse**2 - reverse)
    return total, gm, current * reverse / UT, (n - 1) * gm


def make(model, **more):
    """A device on the grid of a formula."""
    grid = Grid(vgs=tuple(round(-0.2 + 0.025 * i, 4) for i in range(81)))
    columns = rows(grid, lambda *bias: model(*bias, **more))
    axes = [np.array(axis) for axis in (grid.length, grid.vsb, grid.vds, grid.vgs)]
    shape = tuple(axis.size for axis in axes)
    values = {name: columns[name].reshape(shape) for name in ("id", "gm", "gds", "gmb")}
    return Device(Sweep("n", Condition("tt", 27.0), UnitTransistor("n", WIDTH), *axes, values))


# gm n UT/Id = 1/(0.5 + sqrt(0.25 + IC)): Enz, Krummenacher, Vittoz, Analog Integr. Circuits
# Signal Process. 8 (1995) 83 (from memory).  Tolerance 2e-4: the table's own interpolation.
EKV = [(0.1, 0.91608), (1.0, 0.618034), (10.0, 0.270156)]


@pytest.mark.parametrize(("coefficient", "value"), EKV)
def test_ekv_gm_over_id(coefficient, value):
    device = make(charge_ekv)
    current = coefficient * 0.6e-6 * WIDTH / 0.36e-6
    point = device.at(id=current, count=1, length=0.36e-6, vds=1.2)
    assert point.gm_over_id * 1.3 * UT == pytest.approx(value, rel=2e-4)
    back = device.at(gm_over_id=value / (1.3 * UT), length=0.36e-6, vds=1.2)
    assert back.id == pytest.approx(current, rel=1e-3)


@pytest.mark.parametrize("n", [1.0, 1.3, 1.5])
def test_weak_inversion_limit(n):
    # gm/Id <= q/(n k T): the same source, at 300.15 K.  Reached within 1 % deep in weak inversion.
    device = make(charge_ekv, n=n)
    vgs = np.linspace(-0.1, 2.0 - 0.25, 400)
    ratio = device.at(length=0.36e-6, vds=1.2, vgs=vgs).gm_over_id
    assert ratio.max() <= 1 / (n * UT) * (1 + 1e-5)
    assert ratio.max() == pytest.approx(1 / (n * UT), rel=0.01)


def test_largest_gm_over_id_at_300_kelvin():
    # kT/q 25.8520 mV, hence 38.6817 1/V at n = 1: CODATA 2018.
    vt = Condition("tt", 26.85).thermal_voltage
    assert vt == pytest.approx(25.8520e-3, rel=1e-6)
    assert 1 / vt == pytest.approx(38.6817, rel=1e-6)
    assert 1 / (1.3 * vt) == pytest.approx(29.7552, rel=1e-6)
    assert 1 / (1.5 * vt) == pytest.approx(25.7878, rel=1e-6)


def test_square_law():
    # gm/Id = 2/Vov; 100 uA, k' = 200 uA/V^2, W/L = 10: gm 0.632456 mS, Vov 0.316228 V.
    # Textbook square law.  Tolerance 0.2 %: the law has a kink at threshold and at vds = Vov.
    device = make(square_law)
    per_unit = 100e-6 * (WIDTH / 0.36e-6) / 10
    point = device.at(id=per_unit, count=1, length=0.36e-6, vds=1.2)
    assert point.vgs - 0.4 == pytest.approx(0.316228, rel=2e-3)
    whole = point.scaled(id=100e-6)
    assert whole.gm == pytest.approx(0.632456e-3, rel=2e-3)
    assert whole.width / 0.36e-6 == pytest.approx(10, rel=1e-6)
    assert point.gm_over_id * (point.vgs - 0.4) == pytest.approx(2.0, rel=2e-3)


def test_current_density_ratio():
    # Current density at gm/Id 10 over that at 15: EKV with n = 1.3 gives 3.02, real devices 3
    # to 5 (closed form; common practice).
    def closed(ratio, vt):
        """IC of gm n UT/Id in the rational form 1/(0.5 + sqrt(0.25 + IC))."""
        return (1 / (ratio * 1.3 * vt) - 0.5) ** 2 - 0.25

    assert closed(10, 25.852e-3) / closed(15, 25.852e-3) == pytest.approx(3.02, abs=0.01)
    device = make(charge_ekv)
    dense = device.at(gm_over_id=[10, 15], length=0.36e-6, vds=1.2).current_density
    assert dense[0] / dense[1] == pytest.approx(3.02, abs=0.01)
    assert closed(10, UT) / closed(15, UT) == pytest.approx(dense[0] / dense[1], rel=2e-3)


def test_count_scaling_is_exact():
    # N identical units in parallel: every current, conductance and density times N.
    device = make(ekv)
    unit = device.at(gm_over_id=12, length=0.36e-6, vds=1.2)
    many = unit.scaled(count=37)
    for name in ("id", "gm", "gds", "gmb", "width"):
        assert getattr(many, name) == getattr(unit, name) * 37, name
