"""Zeros of the denominators under the traces of f(R), for shapes other than the flat one.

With the flat shape the propagators do not depend on y, and a zero of a denominator in R (in four dimensions there is one
near R = -0.1) is cancelled by the numerator. With another shape it moves with y: the trace is an integral over poles
inside the disc of the expansion in R, whose terms grow like an inverse power of the nearest zero; and where a
denominator vanishes at R = 0 the integral itself has a pole.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from frg.derive import symbols
from frg.derive.equations import FlowEquations
from frg.regulator.tables import shape_table

NEGLIGIBLE = 1e-3  # of the largest d_t R_k: momenta beyond do not matter


@dataclass(frozen=True, kw_only=True)
class Zeros:
    """`nearest` is the smallest |R| at which a denominator vanishes over the momenta that matter; `pole` a momentum y at
    which one vanishes at R = 0, None where there is none."""

    nearest: float
    pole: float | None


def denominator_zeros(equations: FlowEquations, couplings: dict[str, float]) -> Zeros:
    """Zeros of the denominators of `equations.quotients` that contain f, for power coefficients `couplings` of f."""
    import sympy

    name = equations.functions[0].name
    y, P = _momenta(equations)
    R, propagator = sympy.Symbol("R"), sympy.Symbol("P{}")
    powers = {int(k.removeprefix(name)): v for k, v in couplings.items()}
    f = sum(sympy.Float(v) * R**n for n, v in powers.items())
    jets = {symbols.jet(name, (k,)): sympy.diff(f, R, k) for k in range(5)}
    nearest, pole = np.inf, None
    for _, denominator in equations.quotients:
        if not any(denominator.has(j) for j in jets):
            continue
        bottom = denominator.subs(symbols.shape(0), propagator - symbols.momentum()).subs(jets)
        polynomial = sympy.Poly(sympy.expand(bottom), R, propagator)
        values = np.zeros((polynomial.degree(R) + 1, len(P)))  # highest power of R first
        for (i, j), c in polynomial.terms():
            values[-1 - i] += float(c) * P**j
        for column in values.T:
            nearest = min(nearest, float(np.min(np.abs(np.roots(column)), initial=np.inf)))
        change = np.flatnonzero(np.sign(values[-1][:-1]) != np.sign(values[-1][1:]))
        if len(change) and pole is None:
            pole = float(y[change[0]])
    return Zeros(nearest=nearest, pole=pole)


def _momenta(equations: FlowEquations) -> tuple[np.ndarray, np.ndarray]:
    """(y, P(y)) over the momenta at which d_t R_k matters."""
    regulator = equations.regulator
    y = np.concatenate([np.linspace(1e-3, 1, 60), np.geomspace(1, 40, 80)[1:]])
    y = y[y < regulator.support]
    s, slope = shape_table(regulator.shape(), regulator.parameters, 1)(y)[:2]
    insertion = np.abs(2 * s - 2 * y * slope)
    kept = insertion > NEGLIGIBLE * np.max(insertion)
    return y[kept], (y + s)[kept]
