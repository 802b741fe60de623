"""The matrix pencil G + sC of a network, and its solution at complex frequencies.

Everything here is batched over leading axes and works in bounded memory.  A batch item that
holds a value which is not a number answers with not-a-number and disturbs no other item.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gmid.errors import NoSolution, UsageFault

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

_CHUNK_BYTES = 1_000_000
_SINGULAR = 1e-15


@dataclass(frozen=True, eq=False)
class Pencil:
    """Matrices of the equations ``(G + sC) x = b`` of a network.

    Parameters
    ----------
    conductance : ndarray of float, shape (..., n, n)
        G; rows are current balances [S] and branch equations [-].
    capacitance : ndarray of float, shape (..., n, n)
        C; likewise, per rad/s.
    unknowns : tuple of str
        Names of the n unknowns: nodes, ``i(source)`` branch currents, ``x(element)`` states.

    Raises
    ------
    UsageFault
        If the shapes do not fit together.

    Examples
    --------
    >>> Pencil(np.eye(1) * 1e-3, np.eye(1) * 1e-12, ("out",))
    Pencil(1 unknown: out)
    """

    conductance: FloatArray
    capacitance: FloatArray
    unknowns: tuple[str, ...]

    def __post_init__(self) -> None:
        size = len(self.unknowns)
        shapes = self.conductance.shape, self.capacitance.shape
        if shapes[0] != shapes[1] or shapes[0][-2:] != (size, size):
            raise UsageFault(
                f"a pencil of {size} unknowns needs two arrays of shape (..., {size}, {size}), "
                f"found {shapes[0]} and {shapes[1]}."
            )

    @property
    def size(self) -> int:
        """Number of unknowns."""
        return len(self.unknowns)

    @property
    def batch(self) -> tuple[int, ...]:
        """Leading axes: candidates, conditions."""
        return self.conductance.shape[:-2]

    def __repr__(self) -> str:
        word = "unknown" if self.size == 1 else "unknowns"
        batch = f", batch {self.batch}" if self.batch else ""
        return f"Pencil({self.size} {word}: {', '.join(self.unknowns)}{batch})"


def solve_pencil(
    pencil: Pencil, laplace: ArrayLike, right: ArrayLike, *, transpose: bool = False
) -> ComplexArray:
    """Solve ``(G + sC) x = b`` at many complex frequencies, or its transpose.

    Direct LU with partial pivoting for every item and frequency, in chunks of bounded memory:
    the accurate way (see `gmid.network.modes` for the fast one).

    Parameters
    ----------
    pencil : Pencil
        The equations.
    laplace : array_like of complex, shape (..., nf)
        Complex frequencies [rad/s]; leading axes broadcast with those of the pencil.
    right : array_like of float, shape (n, m)
        Right-hand sides, the same for all items.
    transpose : bool
        Solve the adjoint system ``(G + sC)^T x = b`` instead.

    Returns
    -------
    ndarray of complex, shape (..., nf, n, m)
        The solutions.

    Raises
    ------
    NoSolution
        If the matrix is singular; the message names the undetermined unknowns.
    UsageFault
        If the leading axes do not broadcast.

    Examples
    --------
    >>> pencil = Pencil(np.eye(1), np.eye(1), ("out",))
    >>> abs(solve_pencil(pencil, [0.0, 1j], [[1.0]])).round(4).ravel().tolist()
    [1.0, 0.7071]
    """
    s = np.asarray(laplace, dtype=np.complex128)
    b = np.asarray(right, dtype=np.complex128)
    try:
        batch = np.broadcast_shapes(pencil.batch, s.shape[:-1])
    except ValueError:
        raise UsageFault(
            f"frequencies of shape {s.shape} do not broadcast with a batch of {pencil.batch}.",
            hint="Give them as (nf,) or (..., nf) with the batch axes in front.",
        ) from None
    n, nf, items = pencil.size, s.shape[-1], int(np.prod(batch))
    g = np.broadcast_to(pencil.conductance, (*batch, n, n)).reshape(items, n, n)
    c = np.broadcast_to(pencil.capacitance, (*batch, n, n)).reshape(items, n, n)
    s = np.broadcast_to(s, (*batch, nf)).reshape(items, nf)
    if transpose:
        g, c = np.swapaxes(g, -1, -2), np.swapaxes(c, -1, -2)
    x = np.empty((items, nf, n, b.shape[-1]), dtype=np.complex128)
    span = max(1, _CHUNK_BYTES // (16 * n * n))
    width = max(1, min(nf, span))
    step = max(1, span // width)
    for i in range(0, items, step):
        for j in range(0, nf, width):
            part = (slice(i, i + step), slice(j, j + width))
            x[part] = _solve_block(g[part[0]], c[part[0]], s[part], b, pencil.unknowns)
    return x.reshape(*batch, nf, n, b.shape[-1])


def _solve_block(
    g: FloatArray, c: FloatArray, s: ComplexArray, b: ComplexArray, unknowns: tuple[str, ...]
) -> ComplexArray:
    matrix = np.empty((*s.shape, *g.shape[-2:]), dtype=np.complex128)
    matrix.real = g[:, None]
    if s.real.any():
        matrix.real += s.real[..., None, None] * c[:, None]
    np.multiply(s.imag[..., None, None], c[:, None], out=matrix.imag)
    # one sum tells whether anything at all is not finite
    bad = None if np.isfinite(matrix.sum()) else ~np.isfinite(matrix).all(axis=(-1, -2))
    if bad is not None:
        matrix[bad] = np.eye(g.shape[-1])
    try:
        x = np.linalg.solve(matrix, b)
    except np.linalg.LinAlgError:
        raise _explain(matrix, s, unknowns) from None
    if bad is not None:
        x[bad] = np.nan
    return np.asarray(x, dtype=np.complex128)


def _explain(matrix: ComplexArray, s: ComplexArray, unknowns: tuple[str, ...]) -> NoSolution:
    """Find the first singular matrix of a block and put its story into an error."""
    flat = matrix.reshape(-1, *matrix.shape[-2:])
    for entry, frequency in zip(flat, s.ravel(), strict=True):
        names = name_undetermined(entry, unknowns)
        if names:
            return singular_fault(names, complex(frequency))
    return singular_fault(("?",), complex(s.ravel()[0]))


def singular_fault(names: tuple[str, ...], laplace: complex) -> NoSolution:
    """Make the error for a network whose equations have no unique solution.

    Parameters
    ----------
    names : tuple of str
        The undetermined unknowns.
    laplace : complex
        Where the matrix was singular [rad/s].

    Returns
    -------
    NoSolution
        To be raised.

    Examples
    --------
    >>> print(singular_fault(("mid",), 0.0))
    the network does not determine mid at 0 Hz. Give it a resistive path to ground.
    """
    listed = ", ".join(names)
    if laplace == 0:
        return NoSolution(
            f"the network does not determine {listed} at 0 Hz.",
            hint="Give it a resistive path to ground.",
        )
    place = f"{abs(laplace) / (2 * np.pi):.6g} Hz" if laplace.real == 0 else f"s = {laplace:.6g}"
    return NoSolution(
        f"the network does not determine {listed} at {place}.",
        hint="Look for a node without a path to ground, or sources in a loop.",
    )


def name_undetermined(matrix: ArrayLike, unknowns: tuple[str, ...]) -> tuple[str, ...]:
    """Name the unknowns that a singular matrix leaves open; empty if it is regular.

    The matrix is equilibrated first, so that siemens and plain numbers compare; what counts
    as singular is a smallest singular value below 1e-15 of the largest.

    Parameters
    ----------
    matrix : array_like, shape (n, n)
        G + sC at one frequency.
    unknowns : tuple of str
        Names of its columns.

    Returns
    -------
    tuple of str
        At most four names, those that take part most in the null vector.

    Examples
    --------
    >>> name_undetermined([[1e-3, 0.0], [0.0, 0.0]], ("in", "out"))
    ('out',)
    >>> name_undetermined([[1e-3, 0.0], [0.0, 1e-9]], ("in", "out"))
    ()
    """
    scaled, _, columns = equilibrate(np.asarray(matrix))
    if not np.isfinite(scaled).all():
        return ()
    _, sizes, right = np.linalg.svd(scaled)
    if sizes[-1] > _SINGULAR * max(sizes[0], 1e-300):
        return ()
    null = np.abs(right[-1]) * columns
    null = null / null.max()
    order = np.argsort(-null, kind="stable")
    return tuple(unknowns[k] for k in order[:4] if null[k] > 0.5)


def equilibrate(matrix: NDArray[Any]) -> tuple[NDArray[Any], FloatArray, FloatArray]:
    """Scale rows and columns of matrices by powers of two to entries of order one.

    Parameters
    ----------
    matrix : ndarray, shape (..., n, n)
        Real or complex.

    Returns
    -------
    scaled : ndarray, shape (..., n, n)
        ``rows[..., :, None] * matrix * columns[..., None, :]``.
    rows, columns : ndarray of float, shape (..., n)
        The factors, exact powers of two.

    References
    ----------
    D. Ruiz, "A scaling algorithm to equilibrate both rows and columns norms in matrices",
    2001 (from memory).

    Examples
    --------
    >>> scaled, rows, columns = equilibrate(np.diag([1e-6, 1e3]))
    >>> bool((abs(np.diag(scaled) - 1) < 0.5).all())
    True
    """
    size = np.abs(matrix)
    rows, columns = np.ones(matrix.shape[:-1]), np.ones(matrix.shape[:-1])
    for _ in range(4):
        here = rows[..., :, None] * size * columns[..., None, :]
        rows = rows * _inverse_root(here.max(axis=-1))
        columns = columns * _inverse_root(here.max(axis=-2))
    scaled = np.asarray(rows[..., :, None] * matrix * columns[..., None, :])
    return scaled, rows, columns


def _inverse_root(size: FloatArray) -> FloatArray:
    usable = np.isfinite(size) & (size > 0)
    safe = np.where(usable, size, 1.0)
    return np.asarray(np.exp2(-np.round(np.log2(safe) / 2)), dtype=np.float64)
