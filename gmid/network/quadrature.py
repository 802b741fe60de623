"""Adaptive quadrature over log frequency, batched: all items share one set of panels."""

from __future__ import annotations

import itertools
from collections.abc import Callable

import numpy as np

from gmid.errors import NoSolution
from gmid.network.pencil import FloatArray

# Kronrod's 15 points and the 7 Gauss points among them, R. Piessens et al., QUADPACK, 1983
# (from memory; a test confirms that polynomials up to degree 22 come out exact)
_HALF = (
    0.991455371120812639206854697526329, 0.949107912342758524526189684047851,
    0.864864423359769072789712788640926, 0.741531185599394439863864773280788,
    0.586087235467691130294144691693013, 0.405845151377397166906606412076961,
    0.207784955007898467600689403773245, 0.0,
)  # fmt: skip
_KRONROD = (
    0.022935322010529224963732008058970, 0.063092092629978553290700663189204,
    0.104790010322250183839876322541518, 0.140653259715525918745189590510238,
    0.169004726639267902826583426598550, 0.190350578064785409913256402421014,
    0.204432940075298892414161999234649, 0.209482141084727828012999174891714,
)  # fmt: skip
_GAUSS = (
    0.129484966168869693270611432679082,
    0.279705391489276667901467771423780,
    0.381830050505118944950369775488975,
    0.417959183673469387755102040816327,
)

POINTS: FloatArray = np.array([*(-x for x in _HALF[:-1]), *reversed(_HALF)])
"""Places within a panel from -1 to 1."""

KRONROD_WEIGHTS: FloatArray = np.array([*_KRONROD[:-1], *reversed(_KRONROD)])
"""Weights of the 15-point rule."""

GAUSS_WEIGHTS: FloatArray = np.zeros(15)
"""Weights of the 7-point rule on the same points; zero on those it does not use."""
GAUSS_WEIGHTS[1::2] = [*_GAUSS[:-1], *reversed(_GAUSS)]

_ROUNDS = 40
_PANELS_AT_ONCE = 8


def integrate_log(
    density: Callable[[FloatArray], FloatArray], start: float, stop: float, *, accuracy: float
) -> FloatArray:
    """Integrate densities over frequency, with panels in log frequency.

    Parameters
    ----------
    density : callable
        Takes frequencies of shape (nf,) [Hz] and returns an array of shape (..., nf, m).
    start, stop : float
        Ends, above zero [Hz].
    accuracy : float
        Relative accuracy of the sum over the last axis, for every batch item [-].

    Returns
    -------
    ndarray of float, shape (..., m)
        Integrals.

    Raises
    ------
    NoSolution
        If halving the panels does not lead to the accuracy.

    Examples
    --------
    >>> found = integrate_log(lambda f: 1 / f[:, None] ** 2, 1.0, 10.0, accuracy=1e-9)
    >>> found.round(9).tolist()
    [0.9]
    """
    low, high = np.log(start), np.log(stop)
    edges = np.linspace(low, high, max(2, int(np.ceil((high - low) / np.log(10.0))) + 1))
    panels = [(float(a), float(b)) for a, b in itertools.pairwise(edges)]
    done: FloatArray | None = None
    for _ in range(_ROUNDS):
        fine, coarse = _apply_rules(density, panels)
        total = fine.sum(axis=-2) + (0.0 if done is None else done)
        error = np.abs((fine - coarse).sum(axis=-1))
        allowed = accuracy * np.abs(total.sum(axis=-1))[..., None]
        late = np.any((error > allowed).reshape(-1, len(panels)), axis=0)
        if not late.any():
            return np.asarray(total)
        done = fine[..., ~late, :].sum(axis=-2) + (0.0 if done is None else done)
        panels = [
            half
            for (a, b), again in zip(panels, late, strict=True)
            if again
            for half in ((a, (a + b) / 2), ((a + b) / 2, b))
        ]
    raise NoSolution(
        f"the integral from {start:g} to {stop:g} Hz does not reach an accuracy of {accuracy:g}.",
        hint="Ask for less accuracy, or look for a pole on the imaginary axis.",
    )


def _apply_rules(
    density: Callable[[FloatArray], FloatArray], panels: list[tuple[float, float]]
) -> tuple[FloatArray, FloatArray]:
    """Return both rules for each panel, shape (..., n_panels, m)."""
    fine, coarse = [], []
    for first in range(0, len(panels), _PANELS_AT_ONCE):
        ends = np.array(panels[first : first + _PANELS_AT_ONCE])
        middle, half = ends.mean(axis=1), np.diff(ends, axis=1)[:, 0] / 2
        f = np.exp(middle[:, None] + half[:, None] * POINTS)
        values = density(f.ravel())
        values = values.reshape(*values.shape[:-2], len(ends), POINTS.size, values.shape[-1])
        weighted = values * (f * half[:, None])[..., None]
        fine.append(np.einsum("...pkm,k->...pm", weighted, KRONROD_WEIGHTS))
        coarse.append(np.einsum("...pkm,k->...pm", weighted, GAUSS_WEIGHTS))
    return np.concatenate(fine, axis=-2), np.concatenate(coarse, axis=-2)
