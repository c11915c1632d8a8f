"""Heat-kernel coefficients on spheres against published rationals and against sums over the spectrum, mode by mode.

Spectra are written a second time here, from the factorial formulas of M. Rubin, C. Ordonez, J. Math. Phys. 25 (1984)
2888 and 26 (1985) 65, and R. Camporesi, A. Higuchi, J. Geom. Phys. 20 (1996) 1; nothing of the sums uses the module.
Radius 1 throughout, R = d(d-1), except in the traces of a regulator, where k = 1.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from fractions import Fraction
from functools import lru_cache

import mpmath
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from frg.derive.sphere.spectra import (
    Bundle,
    eigenvalue,
    generic_coefficients,
    heat_coefficients,
    multiplicity,
    shifted,
)
from frg.errors import NotYet

SPIN = {"scalar": 0, "vector": 1, "tensor": 2}  # also the first level
TRANSVERSE = [(kind, d) for d in (2, 3, 4, 5, 6) for kind in ("scalar", "spinor", "vector", "tensor")
              if d > 2 or kind in ("scalar", "spinor")]
WHOLE = [(kind, d) for d in (3, 4, 5, 6) for kind in ("full-vector", "traceless")]


@lru_cache(maxsize=20000)
def degeneracy(kind: str, d: int, l: int) -> int:
    f = math.factorial
    if kind == "scalar":
        value = Fraction((2 * l + d - 1) * f(l + d - 2), f(l) * f(d - 1))
    elif kind == "vector":
        value = Fraction(l * (l + d - 1) * (2 * l + d - 1) * f(l + d - 3), f(d - 2) * f(l + 1))
    elif kind == "tensor":
        value = Fraction(
            (d + 1) * (d - 2) * (l + d) * (l - 1) * (2 * l + d - 1) * f(l + d - 3), 2 * f(d - 1) * f(l + 1)
        )
    else:
        value = Fraction(2 * 2 ** (d // 2) * math.comb(l + d - 1, l))
    assert value.denominator == 1
    return int(value)


def laplacian(kind: str, d: int, l: int) -> Fraction:
    if kind == "spinor":  # Lichnerowicz: (i D)^2 = -nabla^2 + R/4
        return Fraction(2 * l + d, 2) ** 2 - Fraction(d * (d - 1), 4)
    return Fraction(l * (l + d - 1) - SPIN[kind])


def real(x: Fraction) -> mpmath.mpf:
    return mpmath.mpf(x.numerator) / x.denominator


def modes(kind: str, d: int, excluded: int) -> Iterator[tuple[int, Fraction]]:
    """(multiplicity, eigenvalue), lowest first, without end."""
    l = SPIN.get(kind, 0) + excluded
    while True:
        yield degeneracy(kind, d, l), laplacian(kind, d, l)
        l += 1


def heat_trace(kind: str, d: int, t: Fraction, *, excluded: int = 0, shift: Fraction = Fraction(0)) -> mpmath.mpf:
    """sum_l D_l exp(-t (lambda_l + shift)), until the terms are below all digits kept."""
    total = mpmath.mpf(0)
    for count, value in modes(kind, d, excluded):
        term = count * mpmath.exp(-real(t * (value + shift)))
        total += term
        if t * value > 1 and term < mpmath.eps * total:
            return total
    raise AssertionError


def whole_field_trace(kind: str, d: int, t: Fraction) -> mpmath.mpf:
    """A vector is transverse + D_m phi without l = 0. A symmetric traceless tensor is TT + D_(m xi_n) without the
    Killing vectors l = 1 + (D_m D_n - g D^2/d) sigma without l = 0, 1. Eigenvalues shift by commutators of D."""
    if kind == "full-vector":
        return heat_trace("vector", d, t) + heat_trace("scalar", d, t, excluded=1, shift=Fraction(1 - d))
    return (
        heat_trace("tensor", d, t)
        + heat_trace("vector", d, t, excluded=1, shift=Fraction(-(d + 1)))
        + heat_trace("scalar", d, t, excluded=2, shift=Fraction(-2 * d))
    )


def left_out(kind: str, d: int, t: Fraction, excluded: int) -> mpmath.mpf:
    """What powers t^(n - d/2) cannot hold in odd d. Whole fields have no such part, so each transverse kind has that
    of the modes missing in the decomposition of the whole field, with the sign turned, and minus the excluded levels."""
    if d % 2 == 0:
        return mpmath.mpf(0)
    total = mpmath.mpf(0)
    if kind == "vector":  # the constant scalar
        total += mpmath.exp(real((d - 1) * t))
    elif kind == "tensor":
        # Killing vectors: d - 1 - (d+1) = -2; conformal Killing vectors: d - 2d = -d; the constant scalar cancels
        # between the scalars and the left-out part of the vectors
        total += d * (d + 1) // 2 * mpmath.exp(real(2 * t)) + (d + 1) * mpmath.exp(real(d * t))
    for (count, value), _ in zip(modes(kind, d, 0), range(excluded), strict=False):
        total -= count * mpmath.exp(-real(t * value))
    return total


def heat_expansion(coefficients: tuple[Fraction, ...], d: int, tR: Fraction) -> mpmath.mpf:
    """V/(4 pi t)^(d/2) sum_n c_n (t R)^n with the volume of the unit sphere."""
    half = mpmath.mpf(d + 1) / 2
    volume = 2 * mpmath.pi**half / mpmath.gamma(half)
    t = real(tR / (d * (d - 1)))
    series = sum((c * tR**n for n, c in enumerate(coefficients)), Fraction(0))
    return volume / (4 * mpmath.pi * t) ** (mpmath.mpf(d) / 2) * real(series)


def deviation(found: mpmath.mpf, expected: mpmath.mpf) -> mpmath.mpf:
    return abs(found - expected) / abs(expected)


# --- multiplicities and eigenvalues ------------------------------------------------------------------------------


def highest_weight(kind: str, d: int, l: int) -> list[Fraction]:
    """Of the representation of SO(d+1) carried by a level."""
    rank = (d + 1) // 2
    if kind == "spinor":
        return [Fraction(2 * l + 1, 2)] + [Fraction(1, 2)] * (rank - 1)
    return ([Fraction(l), Fraction(SPIN[kind])] + [Fraction(0)] * rank)[:rank]


@pytest.mark.parametrize(("kind", "d"), TRANSVERSE)
def test_levels_are_representations_of_the_rotation_group(kind: str, d: int) -> None:
    """Multiplicity = Weyl's dimension formula, eigenvalue = Casimir of SO(d+1) minus Casimir of SO(d)."""
    rank = (d + 1) // 2
    rho = [Fraction(d + 1, 2) - i for i in range(1, rank + 1)]
    for l in range(SPIN.get(kind, 0), 8):
        weight = highest_weight(kind, d, l)
        m = [a + b for a, b in zip(weight, rho, strict=True)]
        dimension = Fraction(1)
        for i in range(rank):
            for j in range(i + 1, rank):
                dimension *= (m[i] ** 2 - m[j] ** 2) / (rho[i] ** 2 - rho[j] ** 2)
            if d % 2 == 0:
                dimension *= m[i] / rho[i]
        # both signs of the Dirac operator; in SO(2r) both signs of the last weight
        twice = kind == "spinor" or (d % 2 == 1 and weight[-1] != 0)
        assert multiplicity(kind, d, l) == degeneracy(kind, d, l) == dimension * (2 if twice else 1)
        little = Fraction(d * (d - 1), 8) if kind == "spinor" else Fraction(SPIN[kind] * (SPIN[kind] + d - 2))
        casimir = sum((a**2 - b**2 for a, b in zip(m, rho, strict=True)), Fraction(0))
        assert eigenvalue(kind, d, l) == laplacian(kind, d, l) == casimir - little


# --- exact coefficients ------------------------------------------------------------------------------------------

# A. Codello, R. Percacci, C. Rahmede, Ann. Phys. 324 (2009) 414, arXiv:0805.2909 (from memory); these rationals were
# also obtained apart from this code, by Euler-Maclaurin summation of the spectra and against mode sums to 1e-36
FOUR_SPHERE = {
    ("tensor", 0): "5 -5/6 -1/432 311/54432 109/1306368 -317/12317184",
    ("vector", 0): "3 1/4 -7/1440 -541/362880 -157/2488320 4019/2299207680",
    ("vector", 1): "3 1/4 -607/1440 37259/362880",  # 10 Killing vectors excluded
    ("scalar", 0): "1 1/6 29/2160 37/54432 149/6531840 179/431101440",
    ("scalar", 2): "1 1/6 -511/2160 3817/54432",  # 1 + 5 modes excluded
}


@pytest.mark.parametrize(("kind", "excluded"), FOUR_SPHERE)
def test_coefficients_on_the_four_sphere_are_the_published_ones(kind: str, excluded: int) -> None:
    published = tuple(Fraction(c) for c in FOUR_SPHERE[kind, excluded].split())
    assert heat_coefficients(Bundle(kind=kind, excluded=excluded), 4, len(published) - 1) == published


@pytest.mark.parametrize("d", [2, 4, 6])
def test_second_spinor_coefficient_is_the_trace_of_curvatures(d: int) -> None:
    """tr [ (Riem^2 - Ric^2)/180 + R^2/72 + Omega^2/12 ] with Omega_mn = R_mnab gamma^a gamma^b/4, which gives
    tr Omega^2 = -(tr 1) Riem^2/8, and on spheres Riem^2 = 2 R^2/(d(d-1)), Ric^2 = R^2/d."""
    riemann, ricci = Fraction(2, d * (d - 1)), Fraction(1, d)
    local = (riemann - ricci) / 180 + Fraction(1, 72) - riemann / 96
    assert heat_coefficients(Bundle(kind="spinor"), d, 2)[2] == 2 ** (d // 2) * local


@pytest.mark.parametrize(
    ("kind", "d", "a", "expected"),
    [
        ("scalar", 3, "1/6", "1"),  # lambda + 1 = nu^2, D = nu^2
        ("scalar", 5, "1/5", "1 -1/30"),  # lambda + 4 = nu^2, D = nu^2 (nu^2 - 1)/12
        ("spinor", 3, "1/4", "2 -1/6"),  # Dirac operator squared, D = 2 (nu^2 - 1/4)
    ],
)
def test_shifted_to_squares_the_series_of_odd_spheres_ends(kind: str, d: int, a: str, expected: str) -> None:
    """sum over nu of nu^2j exp(-t nu^2) = Gamma(j + 1/2)/(2 t^(j + 1/2)) and no further power."""
    ending = [Fraction(c) for c in expected.split()]
    found = shifted(heat_coefficients(Bundle(kind=kind), d, 8), Fraction(a))
    assert found == tuple(ending + [Fraction(0)] * (9 - len(ending)))


# --- against sums over the spectrum ------------------------------------------------------------------------------


@pytest.mark.parametrize("tR", [Fraction(1, 100), Fraction(1, 50)])
@pytest.mark.parametrize(("kind", "d"), TRANSVERSE)
def test_coefficients_are_the_sum_over_modes(kind: str, d: int, tR: Fraction) -> None:
    with mpmath.workdps(50):
        t = tR / (d * (d - 1))
        direct = heat_trace(kind, d, t) - left_out(kind, d, t, 0)
        assert deviation(heat_expansion(heat_coefficients(Bundle(kind=kind), d, 20), d, tR), direct) < 1e-42


@pytest.mark.parametrize(("kind", "d"), WHOLE)
def test_whole_fields_are_the_sum_over_modes_with_nothing_left_out(kind: str, d: int) -> None:
    with mpmath.workdps(50):
        tR = Fraction(1, 50)
        direct = whole_field_trace(kind, d, tR / (d * (d - 1)))
        assert deviation(heat_expansion(heat_coefficients(Bundle(kind=kind), d, 20), d, tR), direct) < 1e-42


@pytest.mark.parametrize("excluded", [1, 2, 3])
@pytest.mark.parametrize("d", [3, 4, 5, 6])
@pytest.mark.parametrize("kind", ["scalar", "vector", "tensor", "spinor"])
def test_excluded_levels_are_missing_from_the_sum(kind: str, d: int, excluded: int) -> None:
    """In even d they change the coefficients, in odd d only what these leave out."""
    with mpmath.workdps(50):
        tR = Fraction(1, 50)
        t = tR / (d * (d - 1))
        direct = heat_trace(kind, d, t, excluded=excluded) - left_out(kind, d, t, excluded)
        coefficients = heat_coefficients(Bundle(kind=kind, excluded=excluded), d, 20)
        assert deviation(heat_expansion(coefficients, d, tR), direct) < 1e-42


@pytest.mark.parametrize("d", [4, 6])
def test_excluded_levels_enter_from_half_the_dimension_on(d: int) -> None:
    every, some = (heat_coefficients(Bundle(kind="vector", excluded=e), d, d) for e in (0, 1))
    assert every[: d // 2] == some[: d // 2]
    assert all(a != b for a, b in zip(every[d // 2 :], some[d // 2 :], strict=True))


# --- traces of a regulator on the four-sphere --------------------------------------------------------------------

MASS = Fraction(3, 10)


def regulator_kernel(y: mpmath.mpf) -> mpmath.mpf:
    """W = (2 s - 2 y s')/(y + s + w), s = y/(exp(y) - 1), k = 1, y > 0."""
    s = y / mpmath.expm1(y)
    ys = s - s**2 * mpmath.exp(y)  # y s'
    return (2 * s - 2 * ys) / (y + s + real(MASS))


def kernel_taylor(upto: int) -> list[Fraction]:
    """Of W at y = 0, exact: s = sum_n B_n y^n/n!, so that y s' has n B_n/n!."""
    s = [Fraction(*map(int, mpmath.bernfrac(n))) / math.factorial(n) for n in range(upto + 1)]
    numerator = [2 * (1 - n) * c for n, c in enumerate(s)]
    denominator = [c + (MASS if n == 0 else 0) + (1 if n == 1 else 0) for n, c in enumerate(s)]
    quotient: list[Fraction] = []
    for n in range(upto + 1):
        known = sum((quotient[j] * denominator[n - j] for j in range(n)), Fraction(0))
        quotient.append((numerator[n] - known) / denominator[0])
    return quotient


@lru_cache(maxsize=1)
def functionals(upto: int) -> list[mpmath.mpf]:
    """Q_(2-n)[W], n = 0 ... upto."""
    spans = [0, 1, 4, 10, 25, 60, 140]
    moments = [mpmath.quad(lambda y, m=m: y ** (m - 1) * regulator_kernel(y), spans) for m in (2, 1)]
    return moments + [real((-1) ** m * math.factorial(m) * c) for m, c in enumerate(kernel_taylor(upto - 2))]


def regulator_trace(kind: str, excluded: int, R: Fraction) -> mpmath.mpf:
    total = mpmath.mpf(0)
    for count, value in modes(kind, 4, excluded):
        y = real(value * R / 12)
        total += count * regulator_kernel(y) if y else count * real(kernel_taylor(0)[0])
        if y > 120:
            return total
    raise AssertionError


@pytest.mark.parametrize("R", [Fraction(1, 100), Fraction(1, 50)])
@pytest.mark.parametrize(
    ("kind", "excluded"), [("tensor", 0), ("vector", 0), ("vector", 1), ("scalar", 0), ("scalar", 2)]
)
def test_trace_of_a_smooth_regulator_is_the_sum_over_the_spectrum(kind: str, excluded: int, R: Fraction) -> None:
    """Tr W(-nabla^2) = V/(4 pi)^2 sum_n c_n R^n Q_(2-n)[W], V R^2/(4 pi)^2 = 24: 12 digits by the fifth term, all
    digits kept by the fifteenth."""
    upto = 14
    with mpmath.workdps(40):
        direct = regulator_trace(kind, excluded, R)
        c = heat_coefficients(Bundle(kind=kind, excluded=excluded), 4, upto)
        terms = [real(24 * c[n] * R**n / R**2) * Q for n, Q in enumerate(functionals(upto))]
        assert deviation(mpmath.fsum(terms[:5]), direct) < 1e-12
        assert deviation(mpmath.fsum(terms), direct) < 1e-36
        # a wrong c_n would show: at 12 digits up to n = 3, at all digits up to n = 10
        assert all(abs(term) > 1e-12 * abs(direct) for term in terms[:4])
        assert all(abs(term) > 1e-35 * abs(direct) for term in terms[:11])


# --- any dimension, shifts, refusals -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("kind", "d"),
    [(kind, d) for d in (3, 4, 5, 6) for kind in ("scalar", "vector", "tensor", "full-vector", "traceless")]
    + [("spinor", 4), ("spinor", 6)],  # 2^(d/2) components in even d only
)
def test_any_dimension_agrees_with_spectra_at_integers(kind: str, d: int) -> None:
    symbol = sympy.Symbol("d")
    exact = heat_coefficients(Bundle(kind=kind), d, 1)
    for found in (generic_coefficients(kind, sympy.Integer(d)), generic_coefficients(kind, symbol)):
        assert tuple(Fraction(str(c.subs(symbol, d))) for c in found) == exact


def test_any_dimension_is_the_published_table() -> None:
    # A. Codello, R. Percacci, C. Rahmede, Ann. Phys. 324 (2009) 414, arXiv:0805.2909 (from memory), d > 2
    d = sympy.Symbol("d")
    published = {
        "vector": (d - 1, (d + 2) * (d - 3) / (6 * d)),
        "tensor": ((d - 2) * (d + 1) / 2, (d + 1) * (d + 2) * (d - 5) / (12 * (d - 1))),
    }
    for kind, expected in published.items():
        assert all(sympy.simplify(a - b) == 0 for a, b in zip(generic_coefficients(kind, d), expected, strict=True))


@pytest.mark.parametrize("d", [3, 4, 6])
def test_shifted_is_the_trace_of_the_shifted_operator(d: int) -> None:
    with mpmath.workdps(50):
        tR, a = Fraction(1, 50), Fraction(2, d * (d - 1))  # Delta + 2R/(d(d-1)) of the TT modes
        t = tR / (d * (d - 1))
        direct = heat_trace("tensor", d, t, shift=Fraction(2)) - left_out("tensor", d, t, 0) * mpmath.exp(-real(a * tR))
        coefficients = shifted(heat_coefficients(Bundle(kind="tensor"), d, 20), a)
        assert deviation(heat_expansion(coefficients, d, tR), direct) < 1e-42


rationals = st.fractions(min_value=-5, max_value=5, max_denominator=60)
series = st.lists(rationals, min_size=1, max_size=8).map(tuple)


@settings(deadline=None)
@given(a=rationals, size=st.integers(1, 9))
def test_shifted_one_is_the_exponential(a: Fraction, size: int) -> None:
    one = (Fraction(1), *[Fraction(0)] * (size - 1))
    assert shifted(one, a) == tuple((-a) ** n / math.factorial(n) for n in range(size))


@settings(deadline=None)
@given(c=series, a=rationals, b=rationals)
def test_shifts_add(c: tuple[Fraction, ...], a: Fraction, b: Fraction) -> None:
    assert shifted(shifted(c, a), b) == shifted(c, a + b)
    assert shifted(c, Fraction(0)) == c


@pytest.mark.parametrize(
    ("kind", "d"), [("scalar", 1), ("spinor", 0), ("vector", 2), ("full-vector", 2), ("traceless", 2)]
)
def test_dimensions_without_a_spectrum_are_refused(kind: str, d: int) -> None:
    with pytest.raises(NotYet):
        heat_coefficients(Bundle(kind=kind), d, 3)
