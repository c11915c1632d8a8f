"""Collecting loop integrals, and doing them in closed form where that is exact."""

from __future__ import annotations

from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.equations import Loop
from frg.errors import FrgError, NotYet
from frg.regulator.base import AbstractRegulator

if TYPE_CHECKING:
    import sympy


class LoopBook:
    """Turns loop integrands into symbols, each distinct one once.

    For the flat shape with alpha = 1 the integral is done here: P = 1 below y = 1, so that the integrand is
    a polynomial in y times the surface term of the kink (D. Litim, Phys. Rev. D 64 (2001)
    105007, hep-th/0103195). For the sharp cutoff the closed forms
    l_0(w) = -ln(1+w), l_n(w) = 1/(1+w)^n are used; they have no integrand."""

    def __init__(
        self, regulator: AbstractRegulator, dimension: sympy.Expr, *, close: bool, dimension_value: float
    ):
        self.regulator = regulator
        self.dimension_value = dimension_value
        self.dimension = dimension
        self.close = close and regulator.name == "flat" and regulator.parameters.get("alpha") == 1.0
        self.loops: list[Loop] = []

    def integral(self, integrand: sympy.Expr, *, decay: int) -> sympy.Expr:
        """integral_0^inf dy y^(d/2-1) integrand, as a symbol or, where `close` holds, its value."""
        if self.regulator.closed_form:
            raise NotYet(
                "the sharp cutoff has no loop integrand for this truncation",
                remedy="use the sharp cutoff with a potential without wave-function renormalisation, "
                "or another regulator",
            )
        if self.close:
            return _flat_integral(integrand, self.dimension)
        for known in self.loops:
            if known.integrand == integrand:
                return symbols.loop_value(self.loops.index(known))
        symbol = symbols.loop_value(len(self.loops))
        self.loops.append(
            Loop(symbol=symbol.name, integrand=integrand, decay=decay, surface=integrand.has(symbols.shape(2)))
        )
        return symbol

    def threshold(self, n: int, w: sympy.Expr, eta: sympy.Expr) -> sympy.Expr:
        """l_n^d(w; eta) in the normalisation of J. Berges, N. Tetradis, C. Wetterich, Phys. Rept. 363
        (2002) 223, hep-ph/0005122: (n + delta_n0)/2 * integral of d_t R (P + w)^-(n+1)."""
        import sympy

        if self.regulator.closed_form:
            if eta != 0:
                raise NotYet(
                    "threshold functions of the sharp cutoff with an anomalous dimension",
                    remedy="drop the third argument of l(n, w, eta), or use another regulator",
                )
            return -sympy.log(1 + w) if n == 0 else (1 + w) ** (-n)
        if self.closed_mass and eta == 0:
            return self._mass_threshold(n, w)
        weight = sympy.Rational(max(n, 1), 2)
        propagator = symbols.inverse_propagator() + w
        return self.integral(
            weight * symbols.regulator_insertion(eta) / propagator ** (n + 1), decay=n + 1
        )

    @property
    def closed_mass(self) -> bool:
        """True for the constant shape where its loops converge (l_0 up to a constant) and are powers."""
        if self.regulator.name != "mass" or not self.dimension_value < 4:
            return False
        return self.dimension_value not in (0.0, 2.0)

    def _mass_threshold(self, n: int, w: sympy.Expr) -> sympy.Expr:
        """l_n^d(w) = max(n,1) alpha B(d/2, n+1-d/2) (alpha+w)^(d/2-n-1) for s = alpha, by the beta integral. For
        n = 0 the part independent of w diverges and is dropped, which leaves the analytic continuation in d;
        at the boundary w = -alpha, where fixed points of this regulator sit, no quadrature converges."""
        import sympy

        d, alpha = self.dimension, sympy.nsimplify(self.regulator.parameters["alpha"])
        beta = sympy.gamma(d / 2) * sympy.gamma(n + 1 - d / 2) / sympy.factorial(n)
        return max(n, 1) * alpha * beta * (alpha + w) ** (d / 2 - n - 1)

    def log_determinant(
        self, blocks: list[tuple[sympy.Expr, sympy.Expr]], mass: sympy.Symbol, eta: sympy.Expr
    ) -> sympy.Expr:
        """(1/v_d) * (1/2) Tr of d_t R times the propagator, for mode blocks given as
        (multiplicity, determinant of the inverse propagator as a polynomial in `mass` = P)."""
        import sympy

        if self.regulator.closed_form:
            return sympy.Add(*(-2 * m * sympy.log(det.subs(mass, 1)) for m, det in blocks))
        if self.closed_mass and eta == 0 and all(sympy.degree(det, mass) == 1 for _, det in blocks):
            return sympy.Add(*(2 * m * self._mass_threshold(0, det.subs(mass, 0)) for m, det in blocks))
        trace = sympy.Add(*(m * sympy.diff(det, mass) / det for m, det in blocks))
        trace = trace.subs(mass, symbols.inverse_propagator())
        return self.integral(symbols.regulator_insertion(eta) * trace, decay=1)


def _flat_integral(integrand: sympy.Expr, d: sympy.Expr) -> sympy.Expr:
    """Exact loop of the flat shape, alpha = 1: s = 1 - y and s' = -1 inside, P = 1; at the kink y = 1
    s' counts with the average of its two sides, -1/2, against s'' = delta(y - 1)."""
    import sympy

    y, s0, s1, s2 = symbols.momentum(), symbols.shape(0), symbols.shape(1), symbols.shape(2)
    inside = integrand.subs(s2, 0).subs({s0: 1 - y, s1: -1})
    # the masses sit in a factor without y, which stays as the user wrote it
    constant, inside = inside.as_independent(y, as_Add=False)
    value = sympy.Integer(0)
    for power in range(_HIGHEST_POWER + 1):
        value += inside.subs(y, 0) / (sympy.factorial(power) * (d / 2 + power))
        inside = sympy.diff(inside, y)
        if inside == 0:
            break
    else:
        raise FrgError("a flat-shape integrand did not reduce to a polynomial in y")
    value = constant * sympy.factor(value)
    if integrand.has(s2):
        value += sympy.diff(integrand, s2).subs({s0: 0, s1: -sympy.Rational(1, 2), y: 1})
    return value


_HIGHEST_POWER = 6
