"""Critical exponents: theta = -(eigenvalues of the stability matrix), from the pencil (db/dg, M)."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np


class Spectrum(NamedTuple):
    """theta (k,) sorted by falling real part, right and left eigenvectors as columns, in reported
    unknowns with left^H right = 1, and the condition number of the scaled Jacobian."""

    theta: np.ndarray
    right: np.ndarray
    left: np.ndarray
    condition: float


def spectrum(
    jacobian: np.ndarray, mass: np.ndarray, scale: np.ndarray, algebraic: np.ndarray,
    columns: np.ndarray | None = None,
) -> Spectrum:
    """Eigenvalues of M^-1 db/dg at a fixed point by QZ, without forming M^-1.

    All arguments are for the active scaled unknowns; `scale` (n,) turns them into reported ones.
    Algebraic unknowns a with condition h(g, a) = 0 follow the others, da = -h_a^-1 h_g dg, and are
    eliminated first. Infinite eigenvalues (directions without a flow) are dropped. `columns` (n,) are sizes expected of
    the eigenvectors' entries: rounding errors of QZ are relative to the norm of the pencil, and the high
    Chebyshev modes of a grid would dominate it."""
    import scipy.linalg

    condition = float(np.linalg.cond(_equilibrated(jacobian)))
    moving, fixed = ~algebraic, algebraic
    J = jacobian[np.ix_(moving, moving)]
    if fixed.any():
        # least squares: at a constant potential the position of the minimum is undetermined
        follow = np.linalg.lstsq(jacobian[np.ix_(fixed, fixed)], jacobian[np.ix_(fixed, moving)], rcond=None)[0]
        J = J - jacobian[np.ix_(moving, fixed)] @ follow
    M = mass[np.ix_(moving, moving)]
    weight = np.ones(moving.sum()) if columns is None else columns[moving]
    J, M = J * weight, M * weight
    rows = 1 / np.maximum(np.max(np.abs(J), axis=1), np.max(np.abs(M), axis=1))[:, None]
    J, M = J * rows, M * rows
    values, left, right = scipy.linalg.eig(J, M, left=True, right=True)
    finite = np.isfinite(values)
    values, left, right = values[finite], left[:, finite], right[:, finite]
    order = sort_order(-values)
    theta = -values[order]
    size = (scale[moving] * weight)[:, None]
    right = right[:, order] * size
    left = (M.conj().T @ left[:, order]) / size
    right = right / np.linalg.norm(right / size, axis=0)
    overlap = np.sum(left.conj() * right, axis=0)
    with np.errstate(divide="ignore", invalid="ignore"):
        left = left / overlap.conj()
    return Spectrum(theta.astype(complex), right.astype(complex), left.astype(complex), condition)


def sort_order(theta: np.ndarray) -> np.ndarray:
    """Indices that sort by falling real part, conjugate pairs with the positive imaginary part first.

    Real parts are compared to 10 digits, so that the rounding of a pair does not decide its order."""
    scale = max(1.0, float(np.max(np.abs(theta)))) if theta.size else 1.0
    rounded = np.round(theta.real / scale, 10)
    return np.lexsort((-theta.imag, -rounded))


def _equilibrated(matrix: np.ndarray) -> np.ndarray:
    """Rows and then columns scaled to a largest entry of 1."""
    rows = np.max(np.abs(matrix), axis=1, keepdims=True)
    scaled = matrix / np.where(rows > 0, rows, 1.0)
    columns = np.max(np.abs(scaled), axis=0, keepdims=True)
    return scaled / np.where(columns > 0, columns, 1.0)


def count_directions(theta: np.ndarray, tolerance: float) -> tuple[int, int]:
    """(relevant, marginal) for Re theta > tolerance and |Re theta| <= tolerance."""
    real = theta.real
    return int(np.sum(real > tolerance)), int(np.sum(np.abs(real) <= tolerance))
