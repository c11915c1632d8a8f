"""Canonical (Gaussian) exponents of the operators a truncation keeps at an order."""

from __future__ import annotations

import numpy as np

from frg.derive.equations import FlowEquations
from frg.evaluate.fieldpolynomial import FieldPolynomial
from frg.evaluate.flow import Flow
from frg.evaluate.taylor import Taylor


def canonical_exponents(equations: FlowEquations, flow: Flow, order: int | None) -> np.ndarray | None:
    """theta = d - f (d - 2)/2 of the couplings of operators with f fields, falling; None for typed-in flows and
    grids, whose operators are not known one by one."""
    truncation = equations.truncation
    if truncation.lagrangian is None:
        return None
    d = truncation.numeric(truncation.dimension)
    block = flow.block
    if truncation.gravity is not None:
        return _of_curvature(block, order, d)
    if isinstance(block, Taylor):
        fields = np.array([2.0 * block.algebra.degrees[k] for _, k in block.layout])
    elif isinstance(block, FieldPolynomial):
        fields = np.array(block.field_degree, dtype=float)
    else:
        return None
    active = block.active(order)
    return np.sort(d - fields[active] * (d - 2) / 2)[::-1]


def _of_curvature(block: object, order: int | None, d: float) -> np.ndarray | None:
    """theta = d - 2n of the coefficients of R^n."""
    if not isinstance(block, Taylor):
        return None
    powers = np.array([float(block.algebra.degrees[k]) for _, k in block.layout])
    return np.sort(d - 2 * powers[block.active(order)])[::-1]
