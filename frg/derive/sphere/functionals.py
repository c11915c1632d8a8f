"""Traces over the sphere by heat-kernel coefficients and Q-functionals.

    Tr W(Delta) = V/(4 pi)^(d/2) sum_n c_n R^n Q_(d/2-n)[W],
    Q_m[W] = 1/Gamma(m) integral dy y^(m-1) W(y) (m > 0),  Q_0 = W(0),  Q_-m = (-1)^m W^(m)(0),

in units of k (A. Codello, R. Percacci, C. Rahmede, Ann. Phys. 324 (2009) 414, appendix A). By parts,
Q_(m-j)[W] = (-1)^j Q_m[W^(j)], which is how functionals of small or half-integer index are done: all loops then
have the weight y^(d/2-1).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.loops import LoopBook
from frg.errors import NotYet

if TYPE_CHECKING:
    import sympy


@dataclass(frozen=True, kw_only=True)
class Functionals:
    """Q_(d/2-n) of quotients numerator/denominator for one regulator and dimension."""

    book: LoopBook
    dimension: sympy.Expr

    @property
    def closed(self) -> bool:
        """True for the flat shape with alpha = 1: P = 1 for y < 1, and W is a polynomial in y."""
        return self.book.close

    def powers(self, numerator: sympy.Expr) -> list[sympy.Expr]:
        """Coefficients in y of a closed numerator: s = 1 - y, s' = -1."""
        import sympy

        y = symbols.momentum()
        inside = numerator.subs({symbols.shape(0): 1 - y, symbols.shape(1): -1})
        return list(reversed(sympy.Poly(sympy.expand(inside), y).all_coeffs()))

    def denominator(self, expression: sympy.Expr) -> sympy.Expr:
        """A closed denominator: P = 1 (the offset of a type III cutoff is part of y, hence of P)."""
        import sympy

        y = symbols.momentum()
        return sympy.expand(expression.subs({symbols.shape(0): 1 - y}))

    def flat(self, n: int, power: int, offset: sympy.Expr) -> sympy.Expr:
        """Q_(d/2-n)[y^power theta(1-y)], analytically continued in the index:
        1/(Gamma(m)(m + power)), and (-1)^m m! where the index is -m = -power. With y = x + offset the integral is over
        0 < x < 1 - offset."""
        import sympy

        m = self.dimension / 2 - n
        if offset != 0:
            edge = 1 - offset
            return sympy.Add(*(
                sympy.binomial(power, i) * offset ** (power - i) * edge ** (m + i) * _power_integral(m, i)
                for i in range(power + 1)
            ))
        return _power_integral(m, power)

    def open(self, n: int, numerator: sympy.Expr, denominator: sympy.Expr, *, decay: int = 1) -> sympy.Expr:
        """Q_(d/2-n)[numerator/denominator] by quadrature, n = 0 or 1, the t-derivatives in the numerator
        taken out of the integrals."""

        rates = sorted((s for s in numerator.free_symbols if s.name.startswith(symbols.RATE)), key=str)
        rest = numerator.subs(dict.fromkeys(rates, 0))
        total = self._integral(n, rest, denominator, decay)
        for r in rates:
            total += r * self._integral(n, numerator.diff(r), denominator, decay)
        return total

    def _integral(self, n: int, numerator: sympy.Expr, denominator: sympy.Expr, decay: int) -> sympy.Expr:
        import sympy

        integrand = numerator / denominator
        if integrand == 0:
            return sympy.Integer(0)
        if n > 1:
            raise NotYet(
                f"traces of index d/2 - {n} for a shape other than flat",
                remedy="use the flat shape, or a truncation with fewer powers of R",
            )
        for _ in range(n):
            integrand = -slope(integrand)
        return self.book.integral(integrand, decay=decay) / sympy.gamma(self.dimension / 2)


def _power_integral(m: sympy.Expr, i: int) -> sympy.Expr:
    """1/(Gamma(m)(m + i)), with its limits at m = 0, -1, -2, ..."""
    import sympy

    if m.is_integer and m <= 0:
        return sympy.Integer((-1) ** i) * sympy.factorial(i) if -m == i else sympy.Integer(0)
    return 1 / (sympy.gamma(m) * (m + i))


def slope(integrand: sympy.Expr) -> sympy.Expr:
    """d/dy, the shape and its derivatives being functions of y."""
    total = integrand.diff(symbols.momentum())
    for k in range(3):
        total += integrand.diff(symbols.shape(k)) * symbols.shape(k + 1)
    return total
