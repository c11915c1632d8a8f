"""Traces of a running function for shapes whose propagators depend on y.

With P(y) = y + s(y) the denominators stay under the integrals, and the flow is a sum of quotients instead of a
polynomial. The functionals of index 2 and 1 are loops; those of index 0, -1, ... need the Taylor coefficients of
W = N/D at y = 0, w_m = (N_m - sum_(i>0) D_i w_(m-i))/D_0.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.sphere.cutoff import Regulated
from frg.derive.sphere.functionals import Functionals
from frg.derive.sphere.heat import heat_sum
from frg.derive.sphere.hessian import curvature
from frg.errors import NotYet
from frg.language.truncation import Truncation
from frg.regulator.base import AbstractRegulator

if TYPE_CHECKING:
    import sympy

HIGHEST = 4  # order in R up to which the traces are complete; shapes other than flat mean nothing much beyond it


def taylor_traces(
    truncation: Truncation, traces: list[Regulated], functionals: Functionals
) -> tuple[sympy.Expr, int]:
    """(sum over the traces of sign * sum_n c_n R^n Q_(2-n)[W], highest order in R for which it is complete). Raises
    NotYet outside four dimensions and for shapes that are singular at y = 0."""
    import sympy

    if truncation.dimension != 4:
        raise NotYet(
            f"a function of R with a shape other than flat in {truncation.dimension} dimensions",
            remedy='use shape = "flat", or dimension = 4',
        )
    s = shape_at_zero(functionals.book.regulator, HIGHEST)
    total = sympy.Integer(0)
    for trace in traces:
        c = heat_sum(truncation, trace, HIGHEST)
        value = sum(c[n] * curvature() ** n * functionals.open(n, trace.numerator, trace.denominator) for n in (0, 1))
        w = quotient_at_zero(trace.numerator, trace.denominator, s)
        for m, coefficient in enumerate(w[: HIGHEST - 1]):
            value += c[m + 2] * curvature() ** (m + 2) * (-1) ** m * sympy.factorial(m) * coefficient
        total += trace.sign * value
    return total, HIGHEST


def shape_at_zero(regulator: AbstractRegulator, upto: int) -> list[sympy.Expr]:
    """Taylor coefficients of s(y) at y = 0, exact for rational parameters."""
    import sympy

    y = sympy.Symbol("y")
    values = {sympy.Symbol(k): sympy.nsimplify(v) for k, v in regulator.parameters.items()}
    shape = regulator.shape().subs(values)
    series = sympy.series(shape, y, 0, upto + 2).removeO()
    coefficients = [sympy.expand(series).coeff(y, k) for k in range(upto + 2)]
    if not sympy.limit(shape, y, 0).is_finite:
        raise NotYet(
            f"traces over the sphere with the shape {regulator.name}, which is singular at y = 0",
            remedy="use a shape that is finite there, for example exponential",
        )
    return coefficients


def quotient_at_zero(numerator: sympy.Expr, denominator: sympy.Expr, s: list[sympy.Expr]) -> list[sympy.Expr]:
    """w_0, w_1, ... of numerator/denominator, nested: later ones contain earlier ones as they stand."""
    import sympy

    y = symbols.momentum()
    length = len(s) - 1
    shape = sum(c * y**k for k, c in enumerate(s))
    slope = sympy.diff(shape, y)

    def coefficients(e: sympy.Expr) -> list[sympy.Expr]:
        poly = sympy.Poly(sympy.expand(e.subs({symbols.shape(0): shape, symbols.shape(1): slope})), y)
        return [poly.coeff_monomial(y**k) for k in range(length)]

    N, D = coefficients(numerator), coefficients(denominator)
    found: list[sympy.Expr] = []
    for m in range(length):
        rest = N[m] - sympy.Add(*(D[i] * found[m - i] for i in range(1, m + 1)))
        found.append(rest / D[0])
    return found
