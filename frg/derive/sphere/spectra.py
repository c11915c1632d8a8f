"""Heat-kernel coefficients of Laplacians on the sphere S^d, exact, from their spectra.

    Tr exp(-t Delta) = V/(4 pi t)^(d/2) sum_n c_n (t R)^n,    Delta = -nabla^2,

for scalars, transverse vectors, transverse traceless tensors and spinors. Eigenvalues and multiplicities: M. Rubin,
C. Ordonez, J. Math. Phys. 25 (1984) 2888 and 26 (1985) 65; R. Camporesi, A. Higuchi, J. Geom. Phys. 20 (1996) 1.

With nu = l + (d-1)/2 (spinors: l + d/2) every eigenvalue is nu^2 + constant (radius 1, R = d(d-1)) and every
multiplicity a polynomial D(nu) of parity (-1)^(d-1). In even d the sum over half-integers nu is, by the Euler-Maclaurin
formula, sum nu^(2j+1) exp(-t nu^2) = j!/(2 t^(j+1)) + sum_m (-t)^m/m! zeta(-2j-2m-1, 1/2), asymptotically for small
t; over the integers of spinors it is the same with zeta(-2j-2m-1). In odd d D is even, and half the sum over
all nu of both signs is the integral up to terms exp(-1/t). The modes
below the first one are images of the polynomial D and are taken out one by one: in even d this changes c_n from
n = d/2 on; in odd d it adds half-integer powers of t, which an expansion in powers of R leaves out.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import TYPE_CHECKING

from frg.errors import NotYet

if TYPE_CHECKING:
    import sympy

Polynomial = tuple[Fraction, ...]  # coefficients of powers of nu, lowest first


@dataclass(frozen=True, kw_only=True)
class Bundle:
    """Modes of one kind on S^d: `kind` is scalar | vector (transverse) | tensor (transverse traceless) | spinor, or
    full-vector | traceless for whole fields; the first `excluded` levels are left out."""

    kind: str
    excluded: int = 0


FIRST_LEVEL = {"scalar": 0, "vector": 1, "tensor": 2, "spinor": 0}


def eigenvalue(kind: str, d: int, level: int) -> Fraction:
    """The eigenvalue of -nabla^2 at a level l (l >= FIRST_LEVEL), radius 1. For spinors, with
    (i D)^2 = -nabla^2 + R/4, it is (l + d/2)^2 - d(d-1)/4."""
    if kind == "spinor":
        return Fraction(2 * level + d, 2) ** 2 - Fraction(d * (d - 1), 4)
    return Fraction(level * (level + d - 1) - {"scalar": 0, "vector": 1, "tensor": 2}[kind])


def multiplicity(kind: str, d: int, level: int) -> Fraction:
    """Number of independent modes at a level, as the value of the polynomial D (below the first level: its image).
    For spinors both signs of the eigenvalue of the Dirac operator, all components."""
    return _evaluate(multiplicity_polynomial(kind, d), _nu(kind, d, level))


def _nu(kind: str, d: int, level: int) -> Fraction:
    return Fraction(2 * level + (d if kind == "spinor" else d - 1), 2)


@lru_cache(maxsize=64)
def multiplicity_polynomial(kind: str, d: int) -> Polynomial:
    """D as a polynomial in nu = l + (d-1)/2 (spinors: nu = l + d/2)."""
    shift = Fraction(d if kind == "spinor" else d - 1, 2)

    def factor(offset: int, slope: int = 1) -> Polynomial:
        return (Fraction(offset) - slope * shift, Fraction(slope))

    if kind == "spinor":
        rising = [factor(i) for i in range(1, d)]  # (l+1)...(l+d-1)/(d-1)!
        return _product(rising, Fraction(2 * 2 ** (d // 2), math.factorial(d - 1)))
    if kind == "scalar":
        rising = [factor(i) for i in range(1, d - 1)]
        return _product([factor(d - 1, 2), *rising], Fraction(1, math.factorial(d - 1)))
    # (l+d-3)!/(l+1)! is a polynomial for d >= 4, and 1/(l+1) in d = 3, where l(l+2) + 1 - 1 ... cancels it
    rising = [factor(i) for i in range(2, d - 2)]
    if kind == "vector":
        if d == 2:
            raise NotYet("transverse vectors on the two-sphere", remedy="use a dimension above 2")
        heads = [factor(0), factor(d - 1), factor(d - 1, 2)]
        norm = Fraction(1, math.factorial(d - 2))
    else:
        heads = [factor(-1), factor(d), factor(d - 1, 2)]
        norm = Fraction((d + 1) * (d - 2), 2 * math.factorial(d - 1))
    if d == 3:  # divide (2l+2) by (l+1)
        heads[2] = (Fraction(2),)
    return _product([*heads, *rising], norm)


def _product(factors: list[Polynomial], norm: Fraction) -> Polynomial:
    result: Polynomial = (norm,)
    for f in factors:
        new = [Fraction(0)] * (len(result) + len(f) - 1)
        for i, a in enumerate(result):
            for j, b in enumerate(f):
                new[i + j] += a * b
        result = tuple(new)
    return result


def _evaluate(p: Polynomial, x: Fraction) -> Fraction:
    total = Fraction(0)
    for c in reversed(p):
        total = total * x + c
    return total


@lru_cache(maxsize=256)
def heat_coefficients(bundle: Bundle, d: int, upto: int) -> tuple[Fraction, ...]:
    """(c_0, ..., c_upto) of a transverse kind on S^d. Raises NotYet for d < 2."""
    kind = bundle.kind
    if kind in COMPOSED:
        return _composed(kind, d, upto, bundle.excluded)
    if d < 2:
        raise NotYet(f"gravity in {d} dimensions", remedy="use a dimension of at least 2")
    D = multiplicity_polynomial(kind, d)
    constant = eigenvalue(kind, d, 0) - _nu(kind, d, 0) ** 2
    # powers of t from t^(-d/2) on, in units of t^(1/2): entry i is the coefficient of t^(i/2 - d/2)
    length = 2 * upto + 1
    series = [Fraction(0)] * length
    for power, a in enumerate(D):
        if a:
            _add_power_sum(series, power, a, d, whole=kind == "spinor")
    if d % 2 == 0:
        first = FIRST_LEVEL[kind] + bundle.excluded
        lowest = -int(_nu(kind, d, 0) - Fraction(1, 2))
        for level in range(lowest, first):
            _add_exponential(series, -multiplicity(kind, d, level), _nu(kind, d, level) ** 2, d)
    series = _times_exponential(series, -constant)
    R, volume = Fraction(d * (d - 1)), _volume_factor(d)
    return tuple(series[2 * n] / volume / R**n for n in range(upto + 1))


def _volume_factor(d: int) -> Fraction:
    """V/(4 pi)^(d/2) on the unit sphere, divided by sqrt(pi) in odd d: both sides of the defining sum have it.
    V = 2 pi^((d+1)/2)/Gamma((d+1)/2)."""
    if d % 2 == 0:
        # Gamma(h + 1/2) = (2h)! sqrt(pi)/(4^h h!), h = d/2
        h = d // 2
        return Fraction(2 * 4**h * math.factorial(h), math.factorial(2 * h)) / Fraction(4) ** h
    h = (d + 1) // 2  # V/(4 pi)^(d/2) = 2 sqrt(pi)/(2^d (h-1)!)
    return Fraction(2, 2**d * math.factorial(h - 1))


def _add_power_sum(series: list[Fraction], power: int, a: Fraction, d: int, *, whole: bool) -> None:
    """a * sum over nu > 0 of nu^power exp(-t nu^2); `whole` says that in even d nu is an integer."""
    if d % 2 == 0:
        j = (power - 1) // 2
        _add(series, -2 * (j + 1) + d, a * math.factorial(j) / 2)
        for m in range(len(series)):
            value = a * Fraction((-1) ** m, math.factorial(m)) * _zeta(power + 2 * m, whole)
            if not _add(series, 2 * m + d, value):
                break
    else:
        # half the sum over all integers: Gamma(j + 1/2)/(2 t^(j+1/2)), in units of sqrt(pi)
        j = power // 2
        gamma = Fraction(math.factorial(2 * j), 4**j * math.factorial(j))
        _add(series, -(2 * j + 1) + d, a * gamma / 2)


def _add(series: list[Fraction], index: int, value: Fraction) -> bool:
    if not 0 <= index < len(series):
        return index < 0
    series[index] += value
    return True


def _zeta(s: int, whole: bool) -> Fraction:
    """zeta(-s) = -B_(s+1)/(s+1), or zeta(-s, 1/2) = -B_(s+1)(1/2)/(s+1) with B_n(1/2) = (2^(1-n) - 1) B_n."""
    n = s + 1
    if whole:
        return -_bernoulli(n) / n
    return -(Fraction(2) ** (1 - n) - 1) * _bernoulli(n) / n


@lru_cache(maxsize=512)
def _bernoulli(n: int) -> Fraction:
    import flint

    value = flint.fmpq.bernoulli(n)
    return Fraction(int(value.p), int(value.q))


def _add_exponential(series: list[Fraction], weight: Fraction, rate: Fraction, d: int) -> None:
    term = weight
    for m in range(len(series)):
        if not _add(series, 2 * m + d, term):
            break
        term = term * -rate / (m + 1)


def _times_exponential(series: list[Fraction], rate: Fraction) -> list[Fraction]:
    """The series times exp(rate t)."""
    result = [Fraction(0)] * len(series)
    factor = Fraction(1)
    for m in range((len(series) + 1) // 2):
        for i in range(len(series) - 2 * m):
            result[i + 2 * m] += factor * series[i]
        factor = factor * rate / (m + 1)
    return result


def shifted(coefficients: tuple[Fraction, ...], a: Fraction) -> tuple[Fraction, ...]:
    """Coefficients of Delta + a R: c_n -> sum_m c_(n-m) (-a)^m/m!."""
    return tuple(
        sum((coefficients[n - m] * (-a) ** m / math.factorial(m) for m in range(n + 1)), Fraction(0))
        for n in range(len(coefficients))
    )


# Delta on D_m phi acts as Delta - R/d on phi; on D_m xi_n + D_n xi_m as Delta - (d+1)R/(d(d-1)) on xi; on
# (D_m D_n - g D^2/d) sigma as Delta - 2R/(d-1) on sigma: commutators of D on the sphere
COMPOSED = {
    "full-vector": (("vector", 0, lambda d: 0 * d), ("scalar", 1, lambda d: -1 / d)),
    "traceless": (
        ("tensor", 0, lambda d: 0 * d), ("vector", 1, lambda d: -(d + 1) / (d * (d - 1))),
        ("scalar", 2, lambda d: -2 / (d - 1)),
    ),
}


def _composed(kind: str, d: int, upto: int, excluded: int) -> tuple[Fraction, ...]:
    if excluded:
        raise ValueError(f"levels of a whole field ({kind}) cannot be left out")
    total = [Fraction(0)] * (upto + 1)
    for part, left_out, shift in COMPOSED[kind]:
        own = heat_coefficients(Bundle(kind=part, excluded=left_out), d, upto)
        for n, c in enumerate(shifted(own, shift(Fraction(d)))):
            total[n] += c
    return tuple(total)


def generic_coefficients(kind: str, d: sympy.Expr) -> tuple[sympy.Expr, sympy.Expr]:
    """(c_0, c_1) for any real d > 2: the trace of 1 and of R/6 over the components of a whole field, and for
    transverse kinds the difference of whole fields; excluded modes enter at R^(d/2) only."""
    import sympy

    def whole(components: sympy.Expr) -> tuple[sympy.Expr, sympy.Expr]:
        return components, components / 6

    def without(total: tuple[sympy.Expr, sympy.Expr], part: str, shift: sympy.Expr) -> tuple[sympy.Expr, sympy.Expr]:
        c0, c1 = generic_coefficients(part, d)
        return total[0] - c0, total[1] - (c1 - shift * c0)

    if kind == "scalar":
        return whole(sympy.Integer(1))
    if kind == "spinor":
        return whole(2 ** (d / 2))
    if kind == "full-vector":
        return whole(d)
    if kind == "traceless":
        return whole((d - 1) * (d + 2) / 2)
    if kind == "vector":
        found = without(whole(d), "scalar", -1 / d)
    else:
        found = without(whole((d - 1) * (d + 2) / 2), "vector", -(d + 1) / (d * (d - 1)))
        found = without(found, "scalar", -2 / (d - 1))
    return sympy.factor(found[0]), sympy.factor(found[1])
