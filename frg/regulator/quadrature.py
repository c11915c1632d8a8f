"""Quadrature rules for loops, with error estimates by comparison with a finer rule."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np

from frg.errors import InputError
from frg.language.program import Arithmetic, Program, compile_expressions
from frg.regulator.base import LoopRule

if TYPE_CHECKING:
    import sympy

DIGITS = 50  # working precision of the tables of s and its derivatives
NEGLIGIBLE = 1e-19  # tail of an integrand that is cut, relative to its largest value

Table = Callable[[np.ndarray], np.ndarray]


def shape_table(shape: sympy.Expr, values: Mapping[str, float], derivatives: int) -> Table:
    """A function from nodes (m,) to s and its derivatives (derivatives + 1, m), evaluated with 50 digits so that
    differences like exp(y) - 1 at small y cost nothing."""
    program = _derivative_program(shape, derivatives)

    def table(y: np.ndarray) -> np.ndarray:
        import mpmath

        with mpmath.workdps(DIGITS):
            fixed = {name: mpmath.mpf(value) for name, value in values.items()}
            arithmetic = _mpmath_arithmetic()
            columns = [program.run({**fixed, "y": mpmath.mpf(float(v))}, arithmetic) for v in y]
            return np.array([[float(x) for x in column] for column in columns]).T.reshape(derivatives + 1, len(y))

    return table


@lru_cache(maxsize=64)
def _derivative_program(shape: sympy.Expr, derivatives: int) -> Program:
    import sympy

    y = sympy.Symbol("y")
    return compile_expressions([shape.diff(y, k) if k else shape for k in range(derivatives + 1)])


def _mpmath_arithmetic() -> Arithmetic:
    import mpmath

    return Arithmetic(
        rational=lambda p, q: mpmath.mpf(p) / q, real=mpmath.mpf, pi=lambda: +mpmath.pi,
        power=lambda x, n: x**n,
        functions={
            "exp": mpmath.exp, "log": mpmath.log, "sqrt": mpmath.sqrt, "sin": mpmath.sin,
            "cos": mpmath.cos, "tan": mpmath.tan, "gamma": mpmath.gamma, "zeta": mpmath.zeta,
        },
    )


def jacobi(count: int, left: float, right: float) -> tuple[np.ndarray, np.ndarray]:
    """Nodes and weights on (0, 1) for the weight x^left (1-x)^right; both exponents > -1."""
    from scipy.special import roots_jacobi

    x, w = roots_jacobi(count, right, left)
    return (x + 1) / 2, w / 2.0 ** (left + right + 1)


def compact_rule(table: Table, dimension: float, count: int, kink: float | None, lowest: float) -> LoopRule:
    """Gauss-Jacobi on [0, 1] with weight y^(d/2-1). `kink` is the slope of s below y = 1 where s has one there."""

    def nodes(count: int) -> tuple[np.ndarray, np.ndarray]:
        return jacobi(count, dimension / 2 - 1, 0.0)

    y, weight = nodes(count)
    s = table(y)
    if kink is None or len(s) < 3:
        surface = np.zeros(0), np.zeros(0), np.zeros((len(s), 0))
    else:
        at_kink = np.zeros((len(s), 1))
        at_kink[1, 0] = kink / 2
        at_kink[2, 0] = -kink
        surface = np.ones(1), np.ones(1), at_kink
    return _finished(y, weight, s, surface, nodes(2 * count + 9), table, False, lowest)


def decaying_rule(table: Table, dimension: float, nodes: int, lowest: float) -> LoopRule:
    """Three panels for shapes that fall faster than any power: Gauss-Jacobi up to y = 1.5, then Gauss-Legendre
    up to 6 and up to where the tail is negligible."""
    end = _tail(table, dimension)

    def panels(count: int) -> tuple[np.ndarray, np.ndarray]:
        cuts = [1.5, min(6.0, end / 2), end]
        x, w = jacobi(count, dimension / 2 - 1, 0.0)
        ys, ws = [cuts[0] * x], [cuts[0] ** (dimension / 2) * w]
        x, w = jacobi(count, 0.0, 0.0)
        for low, high in zip(cuts[:-1], cuts[1:], strict=True):
            y = low + (high - low) * x
            ys.append(y)
            ws.append((high - low) * w * y ** (dimension / 2 - 1))
        return np.concatenate(ys), np.concatenate(ws)

    y, weight = panels(nodes)
    none = np.zeros(0), np.zeros(0), np.zeros((len(table(y[:1])), 0))
    return _finished(y, weight, table(y), none, panels(2 * nodes + 3), table, False, lowest)


def algebraic_rule(
    table: Table, dimension: float, fall: float, nodes: int, subtract: bool, lowest: float, decay: int
) -> LoopRule:
    """Gauss-Jacobi in z = y/(1+y) for integrands that fall like y^(-fall), fall > d/2."""
    right = fall - dimension / 2 - 1

    def mapped(count: int) -> tuple[np.ndarray, np.ndarray]:
        z, w = jacobi(count, dimension / 2 - 1, right)
        return z / (1 - z), w * (1 - z) ** (-fall)

    y, weight = mapped(nodes)
    none = np.zeros(0), np.zeros(0), np.zeros((len(table(y[:1])), 0))
    least = max(decay, 2) if subtract else decay
    return _finished(y, weight, table(y), none, mapped(2 * nodes + 1), table, subtract, lowest, least)


def _tail(table: Table, dimension: float) -> float:
    """Where y^(d/2) (|s| + y |s'|) has fallen to NEGLIGIBLE times its largest value."""
    y = np.concatenate([np.linspace(0.05, 10, 80), np.geomspace(10.5, 2000, 80)])
    s = table(y)[:2]
    size = y ** (dimension / 2) * (np.abs(s[0]) + y * np.abs(s[1]))
    large = np.flatnonzero(size > NEGLIGIBLE * size.max())
    last = int(large[-1])
    if last == len(y) - 1:
        raise InputError(
            "the regulator does not fall off fast enough for a loop integral",
            remedy="choose a shape that decays at least exponentially, or the power law `power`",
        )
    return float(y[last + 1])


def _finished(
    y: np.ndarray, weight: np.ndarray, s: np.ndarray, surface: tuple[np.ndarray, np.ndarray, np.ndarray],
    finer: tuple[np.ndarray, np.ndarray], table: Table, subtract: bool, lowest: float, least: int = 1,
) -> LoopRule:
    error = 0.0
    fine_y, fine_weight = finer
    fine_s = table(fine_y)
    for mass in (-0.5 * lowest, 0.0, 1.0):
        for power in range(least, least + 3):
            coarse = _test_loop(y, weight, s, mass, power)
            fine = _test_loop(fine_y, fine_weight, fine_s, mass, power)
            error = max(error, abs(coarse - fine) / abs(fine))
    if not math.isfinite(error) or error > 1e-4:
        raise InputError(
            f"the loop integrals of this regulator do not converge (relative change {error:.1e} on a finer rule)",
            remedy="choose another regulator or dimension",
        )
    return LoopRule(
        y=y, weight=weight, s=s, surface_y=surface[0], surface_weight=surface[1], surface_s=surface[2],
        subtract=subtract, error=max(error, 2e-16), lowest=lowest,
    )


def _test_loop(y: np.ndarray, weight: np.ndarray, s: np.ndarray, mass: float, power: int) -> float:
    return float(np.sum(weight * (2 * s[0] - 2 * y * s[1]) / (y + s[0] + mass) ** power))


def lowest_propagator(table: Table, upper: float) -> float:
    """min of y + s(y) over 0 < y <= upper, by a dense scan and golden-section refinement."""
    from scipy.optimize import minimize_scalar

    grid = np.concatenate([np.geomspace(1e-9, 0.05, 60), np.linspace(0.06, min(upper, 12.0), 200)])
    values = grid + table(grid)[0]
    best = int(np.argmin(values))
    low, high = grid[max(best - 1, 0)], grid[min(best + 1, len(grid) - 1)]
    found: Any = minimize_scalar(
        lambda v: float(v + table(np.array([v]))[0, 0]), bounds=(low, high), method="bounded",
        options={"xatol": 1e-10},
    )
    return float(min(found.fun, values[best]))
