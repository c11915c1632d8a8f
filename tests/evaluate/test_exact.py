"""Exact rational series: ring axioms without rounding, and one program in three number systems."""

from __future__ import annotations

from fractions import Fraction

import flint
import numpy as np
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from frg.derive.flow import derive_flow
from frg.errors import FrgError
from frg.evaluate.exact import ExactSeries, exact_arithmetic, rational, series_environment
from frg.evaluate.jaxload import load
from frg.evaluate.series import Series, SeriesAlgebra, series_arithmetic
from frg.language.program import Program, compile_expressions
from frg.regulator.shapes import Flat
from tests.conftest import scalar

LENGTH = 6
fractions = st.fractions(min_value=-50, max_value=50, max_denominator=40)
exact = st.lists(fractions, min_size=LENGTH, max_size=LENGTH).map(ExactSeries.of)
units = exact.filter(lambda a: a.coefficients[0] != 0)


def constant(value: object) -> ExactSeries:
    return ExactSeries.of([value] + [0] * (LENGTH - 1))


# ---- the ring ----------------------------------------------------------------------------------


@settings(max_examples=100, deadline=None)
@given(exact, exact, exact, fractions)
def test_ring_axioms(a: ExactSeries, b: ExactSeries, c: ExactSeries, q: Fraction) -> None:
    zero, one = constant(0), constant(1)
    assert a + b == b + a and (a + b) + c == a + (b + c)
    assert a * b == b * a and (a * b) * c == a * (b * c) and a * (b + c) == a * b + a * c
    assert a + zero == a and a * one == a and a - a == zero and -a + a == zero and a - b == -(b - a)
    assert a + q == q + a == a + constant(q) and a * q == q * a == a * constant(q)
    assert a - q == a - constant(q) and q - a == constant(q) - a
    assert hash(a + zero) == hash(a)


@settings(max_examples=100, deadline=None)
@given(units, units)
def test_inverse_is_exact(a: ExactSeries, b: ExactSeries) -> None:
    assert a * a.inverse() == constant(1)
    assert a.inverse().inverse() == a
    assert (a * b).inverse() == a.inverse() * b.inverse()


@settings(max_examples=60, deadline=None)
@given(exact, exact)
def test_product_and_derivative_are_those_of_flint_polynomials(a: ExactSeries, b: ExactSeries) -> None:
    first, second = flint.fmpq_poly(a.coefficients), flint.fmpq_poly(b.coefficients)
    product = first * second
    assert (a * b).coefficients == [product[k] for k in range(LENGTH)]
    slope = first.derivative().derivative()
    assert a.derivative(2).coefficients == [slope[k] for k in range(LENGTH)]
    assert a.derivative(0) == a
    assert a.derivative(LENGTH) == constant(0)


@settings(max_examples=60, deadline=None)
@given(units, st.integers(-4, 5))
def test_powers(a: ExactSeries, n: int) -> None:
    power = exact_arithmetic().power
    result = constant(1)
    for _ in range(abs(n)):
        result = result * a
    assert power(a, n) * constant(1) == (result if n >= 0 else result.inverse())
    assert power(rational(Fraction(2, 3)), n) == rational(Fraction(2, 3) ** n)


def test_numbers_do_not_overflow() -> None:
    """1/(1 - 10^30 t): no truncation of length or size."""
    a = ExactSeries.of([1, -(10**30)] + [0] * 18)
    assert a.inverse().coefficients == [rational(10 ** (30 * k)) for k in range(20)]


def test_division_by_zero_and_unequal_lengths_are_errors() -> None:
    with pytest.raises(ZeroDivisionError):
        ExactSeries.of([0, 1, 2]).inverse()
    with pytest.raises(ValueError, match="argument 2"):
        ExactSeries.of([1, 2]) + ExactSeries.of([1, 2, 3])


# ---- what is not exact is refused --------------------------------------------------------------


def test_exact_inputs() -> None:
    third = flint.fmpq(1, 3)
    assert rational(Fraction(1, 3)) == rational(sympy.Rational(1, 3)) == rational(third) == third
    assert rational(7) == flint.fmpq(7)


@pytest.mark.parametrize("value", [0.5, 1.0, np.float64(0.5), 1 + 0j, "1/3", sympy.Float(0.5), sympy.pi, None])
def test_inexact_numbers_are_refused(value: object) -> None:
    with pytest.raises(TypeError, match="not an exact rational"):
        rational(value)
    a = ExactSeries.of([1, 2])
    for operation in (lambda: a + value, lambda: a * value, lambda: a - value, lambda: ExactSeries.of([1, value])):
        with pytest.raises(TypeError, match="not an exact rational"):
            operation()


def test_programs_with_floats_pi_or_functions_are_refused() -> None:
    x = sympy.Symbol("x")
    a = ExactSeries.of([1, 2, 3])
    for expression, said in [(x + sympy.Float(0.5), "float 0.5"), (x * sympy.pi, "pi is not rational")]:
        with pytest.raises(TypeError, match=said):
            compile_expressions([expression]).run({"x": a}, exact_arithmetic())
    for function in (sympy.exp, sympy.sqrt, sympy.log, sympy.sin, lambda v: v ** sympy.Rational(1, 3), lambda v: v**v):
        with pytest.raises(FrgError, match="does not offer"):
            compile_expressions([function(x)]).run({"x": a}, exact_arithmetic())


# ---- one program, three number systems ---------------------------------------------------------


DEGREE = 8
VOLUME, DIMENSION = Fraction(1, 12), 3
# coefficients of U(rho) = sum_k U_k rho^k, of both signs; two more than the flow's series need
POTENTIAL = [Fraction(1, 7), Fraction(-2, 9), Fraction(3, 5), Fraction(1, 4), Fraction(-1, 8), Fraction(2, 11),
             Fraction(1, 30), Fraction(-1, 50), Fraction(1, 90), Fraction(0), Fraction(1, 200)]  # fmt: skip


def flow_program(components: str) -> Program:
    (flow,) = derive_flow(scalar(about="0", components=components), Flat()).functions
    return compile_expressions([flow.rhs])


def run_exactly(program: Program, components: Fraction, at: Fraction) -> ExactSeries:
    """The flow's right-hand side as a series about rho = `at`."""
    length = len(POTENTIAL)
    shifted = flint.fmpq_poly([rational(c) for c in POTENTIAL])(flint.fmpq_poly([rational(at), rational(1)]))
    series = ExactSeries([shifted[k] for k in range(length)])
    rho = ExactSeries.of([at, 1] + [0] * (length - 2))
    env = {"rho": rho, "vd": rational(VOLUME), "d": rational(DIMENSION), "N": rational(components)}
    (value,) = program.run({**env, **series_environment("U", series, 2)}, exact_arithmetic())
    assert isinstance(value, ExactSeries)
    return value


@pytest.mark.parametrize(("components", "count"), [("1", Fraction(1)), ("N", Fraction(5, 2))])
@pytest.mark.parametrize("at", [Fraction(0), Fraction(1, 10)])
def test_a_flow_is_the_same_in_exact_and_floating_series(components: str, count: Fraction, at: Fraction) -> None:
    jnp = load().numpy
    program = flow_program(components)
    ours = run_exactly(program, count, at)
    algebra = SeriesAlgebra(1, len(POTENTIAL) - 1)
    shifted = flint.fmpq_poly([rational(c) for c in POTENTIAL])(flint.fmpq_poly([rational(at), rational(1)]))
    u = Series(algebra, jnp.asarray([_float(shifted[k]) for k in range(algebra.length)]))
    env = {"rho": algebra.variable(0, float(at)), "vd": float(VOLUME), "d": float(DIMENSION), "N": float(count)}
    env |= {f"U{{{k}}}": u.derivative((k,)) for k in range(3)}
    (value,) = program.run(env, series_arithmetic())
    expected = np.array([_float(c) for c in ours.coefficients])
    assert np.abs(expected[: DEGREE + 1]).min() > 1e-6
    assert np.asarray(value.coefficients) == pytest.approx(expected, rel=1e-11)


@pytest.mark.parametrize(("components", "count"), [("1", Fraction(1)), ("N", Fraction(5, 2))])
def test_a_flow_in_floats_is_the_sum_of_its_exact_series(components: str, count: Fraction) -> None:
    """At the point of expansion the first coefficient is the value; near it the series, cut at degree 8, converges to
    the value like rho^9, which the ratio of two distances shows."""
    program = flow_program(components)
    plain = {"vd": float(VOLUME), "d": float(DIMENSION), "N": float(count)}
    polynomial = np.polynomial.Polynomial([float(c) for c in POTENTIAL])

    def value(rho: float) -> float:
        jets = {f"U{{{k}}}": polynomial.deriv(k)(rho) if k else polynomial(rho) for k in range(3)}
        (found,) = program.run({**plain, "rho": rho, **jets}, series_arithmetic())
        return float(found)

    for at in (Fraction(0), Fraction(1, 10), Fraction(-1, 20)):
        assert value(float(at)) == pytest.approx(_float(run_exactly(program, count, at).coefficients[0]), rel=1e-14)
    cut = np.polynomial.Polynomial([_float(c) for c in run_exactly(program, count, Fraction(0)).coefficients[: DEGREE + 1]])
    far, near = (abs(value(rho) - cut(rho)) for rho in (0.04, 0.02))
    assert 2**8 < far / near < 2**10


def test_the_exact_flow_of_a_quartic_potential_by_hand() -> None:
    """U = m rho + (l/2) rho^2 in d = 3 with the flat shape: 1/(1+m+3 l rho) expanded by hand gives d_t U_1 = -2 m - 12 l
    v_d/(3 (1+m)^2) and d_t (U_2/2) = -l/2 + 36 l^2 v_d/(3 (1+m)^3): an elementary expansion, no source."""
    m, l = Fraction(-1, 5), Fraction(2, 7)
    series = ExactSeries.of([0, m, l / 2, 0, 0])
    env = {"rho": ExactSeries.of([0, 1, 0, 0, 0]), "vd": rational(VOLUME), "d": rational(DIMENSION)}
    program = flow_program("1")
    (value,) = program.run({**env, **series_environment("U", series, 2)}, exact_arithmetic())
    mass = -2 * m - 4 * VOLUME / 3 * 3 * l / (1 + m) ** 2
    quartic = -l / 2 + 4 * VOLUME / 3 * 9 * l**2 / (1 + m) ** 3
    assert value.coefficients[1] == rational(mass) and value.coefficients[2] == rational(quartic)


def _float(q: object) -> float:
    return int(q.p) / int(q.q)  # type: ignore[attr-defined]
