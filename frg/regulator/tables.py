"""Tables of a shape s(y) and its derivatives, and the least value of P(y) = y + s(y)."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np

from frg.language.program import Arithmetic, Program, compile_expressions

if TYPE_CHECKING:
    import sympy

DIGITS = 40  # working precision of the tables where y is of order one
ORIGIN = 1e-30  # stands for y = 0 where a shape is 0/0 there

Table = Callable[[np.ndarray], np.ndarray]


def shape_table(shape: sympy.Expr, values: Mapping[str, float], derivatives: int) -> Table:
    """A function from nodes (m,) to s and its derivatives (derivatives + 1, m), correctly rounded.

    The tables are made in high precision: in y/(exp(y) - 1) and its j-th derivative j + 2 powers of y
    cancel, and the digits that costs at the smallest node are added to the working precision."""
    program = derivative_program(shape, derivatives)

    def table(y: np.ndarray) -> np.ndarray:
        import mpmath

        least = float(y.min()) if len(y) else 1.0
        lost = (derivatives + 2) * max(0, -math.floor(math.log10(least)))
        with mpmath.workdps(DIGITS + lost):
            fixed = {name: mpmath.mpf(value) for name, value in values.items()}
            arithmetic = mpmath_arithmetic()
            columns = [program.run({**fixed, "y": mpmath.mpf(float(v))}, arithmetic) for v in y]
            return np.array([[float(x) for x in column] for column in columns]).reshape(len(y), derivatives + 1).T

    return table


@lru_cache(maxsize=64)
def derivative_program(shape: sympy.Expr, derivatives: int) -> Program:
    """s and its first derivatives with respect to y as one program."""
    import sympy

    y = sympy.Symbol("y")
    return compile_expressions([shape.diff(y, k) if k else shape for k in range(derivatives + 1)])


def mpmath_arithmetic() -> Arithmetic:
    """Numbers of mpmath, in the working precision of the moment."""
    import mpmath

    return Arithmetic(
        rational=lambda p, q: mpmath.mpf(p) / q, real=mpmath.mpf, pi=lambda: +mpmath.pi,
        power=lambda x, n: x**n,
        functions={
            "exp": mpmath.exp, "log": mpmath.log, "sqrt": mpmath.sqrt, "sin": mpmath.sin,
            "cos": mpmath.cos, "tan": mpmath.tan, "gamma": mpmath.gamma, "zeta": mpmath.zeta,
        },
    )


def least_propagator(table: Table, end: float) -> tuple[float, float]:
    """(y, P) where P(y) = y + s(y) is least on 0 <= y <= end: dense scan, then bisection on P' = 1 + s'.

    y is 0 where P is least at the origin. s must be finite there. A dip of P narrower than the scan, about
    2 % of y, is not seen."""
    y = np.concatenate([[ORIGIN], end * np.geomspace(1e-6, 1, 700)])
    P = y + table(y)[0]
    best = int(np.argmin(P))
    if best == 0:
        return 0.0, float(P[0])
    low, high = y[best - 1], y[min(best + 1, len(y) - 1)]
    for _ in range(60):
        middle = (low + high) / 2
        if table(np.array([middle]))[1, 0] < -1:
            low = middle
        else:
            high = middle
    position = float(low + high) / 2
    value = position + float(table(np.array([position]))[0, 0])
    return (position, value) if value <= P[best] else (float(y[best]), float(P[best]))


def power_of_decay(table: Table) -> float | None:
    """b where s falls like y^(-b), None where it falls faster than any power; minus infinity where it grows
    or where no law is recognised."""
    y = np.array([1e9, 1e11])
    s, slope = table(y)[:2]
    if (s == 0).all():
        return None
    if not (np.isfinite(s).all() and np.isfinite(slope).all() and (s > 0).all()):
        return -math.inf
    b: Any = -y * slope / s
    if abs(b[1] - b[0]) < 1e-4 * max(abs(b[1]), 1e-3):
        # corrections to the leading power die out with y: round them away
        return float(round(b[1], 8 if abs(b[1] - b[0]) < 1e-8 else 4))
    return None if b[1] > 5 * b[0] > 50 else -math.inf
