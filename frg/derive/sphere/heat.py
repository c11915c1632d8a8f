"""Heat-kernel coefficients of the argument of a regulator, as sympy numbers."""

from __future__ import annotations

from typing import TYPE_CHECKING

from frg.derive.sphere.cutoff import Regulated
from frg.derive.sphere.spectra import generic_coefficients, heat_coefficients
from frg.errors import NotYet
from frg.language.truncation import Truncation

if TYPE_CHECKING:
    import sympy


def heat_sum(truncation: Truncation, trace: Regulated, upto: int) -> list[sympy.Expr]:
    """c_0 .. c_upto of the regulator's argument of a trace: exact in whole dimensions, and for any real dimension up
    to n = 1."""
    import sympy

    d = truncation.value(truncation.dimension)
    if d.is_Integer and d >= 3:
        rational = heat_coefficients(trace.bundle, int(d), upto)
        plain = [sympy.Rational(c.numerator, c.denominator) for c in rational]
    elif upto <= 1:
        plain = list(generic_coefficients(trace.bundle.kind, truncation.dimension))[: upto + 1]
    else:
        raise NotYet(
            "powers of R beyond the first in a dimension that is no whole number above 2",
            remedy="use a whole dimension, or an action linear in R",
        )
    a = trace.endomorphism
    return [
        sympy.Add(*(plain[n - m] * (-a) ** m / sympy.factorial(m) for m in range(n + 1))) for n in range(len(plain))
    ]
