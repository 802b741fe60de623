"""Closed forms of real amplifiers in filters: they explain and start searches, never judge.

All of them are first order in 1/gm, 1/A0 or w0/wt. They fail once ``Q d(1/Q)`` nears 1; the
verdict is always the exact nodal analysis.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from gmid.errors import UsageFault
from gmid.network.pencil import ComplexArray, FloatArray

Value = float | FloatArray
"""A number, or an array of shape (...)."""


@dataclass(frozen=True, eq=False)
class Stage:
    """One integrator as its amplifier sees it, per side.

    Parameters
    ----------
    gm : float or ndarray, shape (...)
        Short-circuit transconductance of the amplifier [S].
    feedback_capacitance : float or ndarray, shape (...)
        C, from output to virtual ground [F].
    load_capacitance : float or ndarray, shape (...)
        CL, all other capacitance at the output [F].
    load_conductance : float or ndarray, shape (...)
        GL, all conductance at the output, that of the feedback and of the amplifier included [S].
    ground_capacitance : float or ndarray, shape (...)
        Cx, all other capacitance at the virtual ground [F].
    ground_conductance : float or ndarray, shape (...)
        Gx, all conductance at the virtual ground, that of the feedback included [S].
    feedback_conductance : float or ndarray, shape (...)
        In parallel with C [S].

    Examples
    --------
    >>> stage = Stage(1e-3, 4e-12, 1e-12, 1e-5, 1e-12, 2e-5)
    >>> round(float(stage.beta), 3), round(float(stage.stability_capacitance) * 1e12, 3)
    (0.8, 1.8)
    """

    gm: Value
    feedback_capacitance: Value
    load_capacitance: Value = 0.0
    load_conductance: Value = 0.0
    ground_capacitance: Value = 0.0
    ground_conductance: Value = 0.0
    feedback_conductance: Value = 0.0

    @property
    def beta(self) -> FloatArray:
        """Capacitive feedback factor C/(Cx + C) [-]."""
        c = self.feedback_capacitance
        return np.asarray(c / (self.ground_capacitance + c))

    @property
    def accuracy_capacitance(self) -> FloatArray:
        """CL + C, which sets the lag of the integrator [F]."""
        return np.asarray(self.load_capacitance + self.feedback_capacitance)

    @property
    def stability_capacitance(self) -> FloatArray:
        """CL + (1 - beta) C, which sets bandwidth and stability of the amplifier's loop [F]."""
        return np.asarray(self.load_capacitance + (1.0 - self.beta) * self.feedback_capacitance)

    def find_error(self, w0: Value) -> tuple[FloatArray, FloatArray]:
        """Return the relative magnitude and the phase error of the integrating admittance.

        Parameters
        ----------
        w0 : float or ndarray, shape (...)
            Where to look [rad/s].

        Returns
        -------
        real, imaginary : ndarray of float, shape (...)
            Of ``eps/(s C)`` at ``s = j w0``, first order in 1/gm [-].
        """
        c, gm = self.feedback_capacitance, self.gm
        gl, gx = self.load_conductance, self.ground_conductance
        real = (gl * (self.ground_capacitance + c) + gx * self.accuracy_capacitance) / (gm * c)
        lag = w0 * self.accuracy_capacitance / (self.beta * gm)
        return np.asarray(real), np.asarray(lag - gl * gx / (w0 * c * gm))

    def find_admittance(self, s: complex) -> tuple[ComplexArray, ComplexArray]:
        """Return the feedback admittance YF and what the amplifier adds to it, first order.

        Parameters
        ----------
        s : complex
            Where to look [rad/s].

        Returns
        -------
        feedback, added : ndarray of complex, shape (...)
            ``YF`` and ``(YL + YF)(Yx + YF)/gm`` [S].
        """
        c = self.feedback_capacitance
        out = s * self.accuracy_capacitance + self.load_conductance
        ground = s * (self.ground_capacitance + c) + self.ground_conductance
        feedback = s * np.asarray(c) + self.feedback_conductance
        return (
            np.asarray(feedback, dtype=np.complex128),
            np.asarray(out * ground / self.gm, dtype=np.complex128),
        )

    def shift_of_pole(self, w0: float) -> FloatArray:
        """Return the relative change of the pole of a first-order section.

        Parameters
        ----------
        w0 : float
            Its pole [rad/s].

        Returns
        -------
        ndarray of float, shape (...)
            ``YL Yx/(gm w0 C)`` at ``s = -w0``, where the feedback admittance is zero [-].
        """
        c = self.feedback_capacitance
        out = self.load_conductance - w0 * c - w0 * self.load_capacitance
        ground = self.ground_conductance - w0 * c - w0 * self.ground_capacitance
        return np.asarray(out * ground / (self.gm * w0 * c))


@dataclass(frozen=True, eq=False)
class Shift:
    """What real amplifiers do to a section.

    Parameters
    ----------
    frequency : ndarray of float, shape (...)
        Relative change of w0 [-].
    loss : ndarray of float, shape (...)
        Change of 1/Q [-].
    q : ndarray of float, shape (...)
        Quality factor before.

    Examples
    --------
    >>> round(float(Shift(np.array(-0.01), np.array(-0.02), np.array(5.0)).shifted_q), 3)
    5.556
    """

    frequency: FloatArray
    loss: FloatArray
    q: FloatArray

    @property
    def shifted_q(self) -> FloatArray:
        """Quality factor after; negative is unstable [-]."""
        return np.asarray(1.0 / (1.0 / self.q + self.loss))

    @property
    def is_trusted(self) -> bool:
        """Whether first order is good enough to explain the exact result."""
        return bool(np.all(np.abs(self.q * self.loss) < 0.3))


def shift_of_stages(w0: Value, q: Value, stages: Sequence[Stage]) -> Shift:
    """Compute the shift of w0 and Q of a two-integrator loop with transconductor amplifiers.

    Parameters
    ----------
    w0 : float or ndarray, shape (...)
        Pole frequency [rad/s].
    q : float or ndarray, shape (...)
        Quality factor [-].
    stages : sequence of Stage
        The integrators of the loop.

    Returns
    -------
    Shift
        ``d(1/Q) = -sum[w0 (CL+C)/(beta gm) - GL Gx/(w0 C gm)]`` and
        ``dw/w = -1/2 sum[GL (Cx+C) + Gx (CL+C)]/(gm C)``; GL and Gx both include the damping.

    Examples
    --------
    >>> stage = Stage(1e-3, 1e-12, 0.0, 1e-6, 0.0, 1e-6)
    >>> found = shift_of_stages(1e6, 5.0, [stage, stage])
    >>> round(float(found.frequency), 6), bool(abs(found.loss) < 1e-12)
    (-0.002, True)
    """
    errors = [stage.find_error(w0) for stage in stages]
    frequency = -0.5 * np.sum([real for real, _ in errors], axis=0)
    loss = -np.sum([imaginary for _, imaginary in errors], axis=0)
    return Shift(np.asarray(frequency), np.asarray(loss), np.asarray(q, dtype=np.float64))


def shift_at_pole(w0: float, q: float, stages: tuple[Stage, Stage]) -> Shift:
    """Compute the shift of a two-integrator loop by perturbing the pole itself.

    First order in 1/gm like `shift_of_stages`, but for any Q: the integrators' errors are taken
    at the complex pole, not at ``j w0``.

    Parameters
    ----------
    w0 : float
        Pole frequency [rad/s].
    q : float
        Quality factor [-].
    stages : pair of Stage
        The integrators, with their feedback conductance.

    Returns
    -------
    Shift
        Of the pole ``s - (ea YFb + eb YFa)/(Ca YFb + Cb YFa)``.

    Examples
    --------
    >>> damped = Stage(1e-3, 1e-12, 0.0, 1.2e-6, 0.0, 1.2e-6, 2e-7)
    >>> found = shift_at_pole(1e6, 5.0, (Stage(1e-3, 1e-12, 0.0, 1e-6, 0.0, 1e-6), damped))
    >>> round(float(found.frequency), 4), round(float(found.loss), 5)
    (-0.002, 0.0004)
    """
    pole = w0 * complex(-0.5 / q, np.sqrt(1.0 - 0.25 / q**2 + 0j).real)
    (ya, ea), (yb, eb) = (stage.find_admittance(pole) for stage in stages)
    ca, cb = (stage.feedback_capacitance for stage in stages)
    moved = pole - (ea * yb + eb * ya) / (ca * yb + cb * ya)
    size = np.abs(moved)
    return Shift(
        np.asarray(size / w0 - 1.0), np.asarray(-2.0 * moved.real / size - 1.0 / q), np.asarray(q)
    )


def shift_of_voltage_amplifiers(
    w0: ArrayLike, q: ArrayLike, *, gain: ArrayLike, bandwidth: ArrayLike, loading: ArrayLike = 2.0
) -> Shift:
    """Compute the shift of Q of a two-integrator loop with amplifiers of low output impedance.

    Parameters
    ----------
    w0 : array_like, shape (...)
        Pole frequency [rad/s].
    q : array_like, shape (...)
        Quality factor, high [-].
    gain : array_like, shape (...)
        A0 of either amplifier [-].
    bandwidth : array_like, shape (...)
        Their unity-gain frequency wt [rad/s].
    loading : array_like, shape (...)
        Sum over both virtual grounds of ``sum G/(w0 C)`` [-].

    Returns
    -------
    Shift
        ``1/Q' = 1/Q + loading/A0 - 2 w0/wt``; w0 is not told.

    References
    ----------
    J. Tow, "Active RC filters - a state-space realization", Proc. IEEE 56, 1968;
    L. C. Thomas, "The biquad: part I", IEEE Trans. Circuit Theory 18, 1971 (from memory).

    Examples
    --------
    >>> found = shift_of_voltage_amplifiers(1.0, 10.0, gain=np.inf, bandwidth=200.0)
    >>> round(float(found.shifted_q), 3)
    11.111
    """
    loss = np.divide(loading, gain) - 2.0 * np.divide(w0, bandwidth)
    zero = np.zeros(np.shape(loss))
    return Shift(zero, np.asarray(loss), np.asarray(q, dtype=np.float64))


def shift_of_gm_c(
    w0: ArrayLike, q: ArrayLike, *, losses: Sequence[tuple[ArrayLike, ArrayLike]], pole: ArrayLike
) -> Shift:
    """Compute the shift of Q of a two-integrator loop of transconductors and capacitors.

    Parameters
    ----------
    w0 : array_like, shape (...)
        Pole frequency [rad/s].
    q : array_like, shape (...)
        Quality factor [-].
    losses : sequence of (conductance, capacitance)
        Output conductance [S] and capacitance [F] of each node of the loop.
    pole : array_like, shape (...)
        Excess-phase pole of the transconductors [rad/s].

    Returns
    -------
    Shift
        ``1/Q' = 1/Q + sum go/(w0 C) - 2 w0/p``; w0 is not told.

    Examples
    --------
    >>> found = shift_of_gm_c(1e6, 5.0, losses=[(1e-8, 1e-12)] * 2, pole=100e6)
    >>> round(float(found.loss), 12)
    0.0
    """
    lossy = sum((np.divide(go, np.multiply(w0, c)) for go, c in losses), start=np.zeros(()))
    loss = lossy - 2.0 * np.divide(w0, pole)
    return Shift(np.zeros(np.shape(loss)), np.asarray(loss), np.asarray(q, dtype=np.float64))


def find_pole_ratio(phase_margin: ArrayLike) -> FloatArray:
    """Return the excess-phase pole over the loop bandwidth that gives a phase margin.

    Parameters
    ----------
    phase_margin : array_like, shape (...)
        Of the two-pole loop ``w_loop/(s (1 + s/p))``, between 0 and 90 [deg].

    Returns
    -------
    ndarray of float, shape (...)
        ``p/w_loop``, with the exact crossover [-].

    Raises
    ------
    UsageFault
        If the margin is not between 0 and 90 degrees.

    References
    ----------
    H. W. Bode, "Network analysis and feedback amplifier design", 1945 (from memory).

    Examples
    --------
    >>> find_pole_ratio([51.827, 60.0]).round(3).tolist()
    [1.0, 1.5]
    """
    margin = np.asarray(phase_margin, dtype=np.float64)
    if np.any((margin <= 0) | (margin >= 90)):
        raise UsageFault(
            f"a phase margin of {margin} degrees cannot be had from one excess-phase pole.",
            hint="Ask for a value between 0 and 90 degrees; 55 to 65 is common practice.",
        )
    lag = np.tan(np.deg2rad(90.0 - margin))
    return np.asarray(1.0 / (lag * np.sqrt(1.0 + lag**2)))


def find_margin(pole_ratio: ArrayLike) -> FloatArray:
    """Return the phase margin of a loop with an excess-phase pole.

    Parameters
    ----------
    pole_ratio : array_like, shape (...)
        ``p/w_loop`` of the loop ``w_loop/(s (1 + s/p))`` [-].

    Returns
    -------
    ndarray of float, shape (...)
        [deg].

    Examples
    --------
    >>> find_margin([1.0, 1.5, 2.0, 3.0]).round(1).tolist()
    [51.8, 60.0, 65.5, 72.4]
    """
    ratio = np.asarray(pole_ratio, dtype=np.float64)
    # with x = w_crossover/p: x sqrt(1 + x^2) = 1/ratio
    square = 0.5 * (np.sqrt(1.0 + 4.0 / ratio**2) - 1.0)
    return 90.0 - np.rad2deg(np.arctan(np.sqrt(square)))


def find_tuning_residual(spread: float, bits: int, *, guard: float = 0.05) -> float:
    """Return the frequency error that a linear bank of capacitors leaves.

    Parameters
    ----------
    spread : float
        Largest relative change of the time constants, either way [-].
    bits : int
        Bits of the bank.
    guard : float
        Relative reach of the bank beyond the spread, at either end [-].

    Returns
    -------
    float
        ``(Cmax - Cmin)/(2 Cmin (2^bits - 1))``, the largest relative error [-].

    Raises
    ------
    UsageFault
        If the spread is not between 0 and 1, or there is no bit.

    Examples
    --------
    >>> round(100 * find_tuning_residual(0.25, 6), 2)
    0.67
    """
    if not 0 <= spread < 1 or bits < 1:
        raise UsageFault(
            f"a bank of {bits} bits for a spread of {100 * spread:g} % makes no sense."
        )
    low, high = (1.0 - guard) / (1.0 + spread), (1.0 + guard) / (1.0 - spread)
    return (high - low) / (2.0 * low * (2.0**bits - 1.0))
