"""Truncated series on jax arrays as a number system: ring axioms, functions, derivatives, automatic differentiation.

Reference values are exact integer arithmetic, sympy's derivatives at the origin, mpmath's Taylor coefficients of the
composed function, or finite differences; no outside source is needed.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise

import mpmath
import numpy as np
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from frg.evaluate import series as ts
from frg.evaluate.jaxload import load
from frg.evaluate.series import Series, SeriesAlgebra, monomials, power, series_arithmetic
from frg.language.program import compile_expressions

jax, jnp, _ = load()

LINE = SeriesAlgebra(1, 6)
PLANE = SeriesAlgebra(2, 3)
SPACE = SeriesAlgebra(3, 2)
ALGEBRAS = [LINE, PLANE, SPACE]
X = sympy.symbols("x0 x1 x2")


def label(algebra: SeriesAlgebra) -> str:
    return f"{algebra.variables}-variables-degree-{algebra.degree}"


def made(algebra: SeriesAlgebra, values: object) -> Series:
    return Series(algebra, jnp.asarray(np.asarray(values, dtype=float)))


def digits(a: Series) -> np.ndarray:
    return np.asarray(a.coefficients)


@st.composite
def triples(draw: st.DrawFn, *, least: int = -9, most: int = 9) -> list[Series]:
    """Three series of one algebra whose coefficients are small integers: floats compute with them exactly."""
    algebra = draw(st.sampled_from(ALGEBRAS))
    coefficients = st.lists(st.integers(least, most), min_size=algebra.length, max_size=algebra.length)
    return [made(algebra, draw(coefficients)) for _ in range(3)]


def same(a: Series, b: Series) -> bool:
    return a.algebra == b.algebra and np.array_equal(digits(a), digits(b))


# ---- monomials ---------------------------------------------------------------------------------


@pytest.mark.parametrize(("variables", "degree"), [(0, 4), (1, 0), (1, 7), (2, 5), (3, 4), (4, 2)])
def test_monomials_are_all_there_once_and_graded(variables: int, degree: int) -> None:
    found = monomials(variables, degree)
    assert len(found) == len(set(found)) == math.comb(variables + degree, variables)
    assert all(len(e) == variables and min(e, default=0) >= 0 for e in found)
    assert all(sum(a) <= sum(b) for a, b in pairwise(found))
    assert sum(found[-1]) == (degree if variables else 0)


# ---- the ring ----------------------------------------------------------------------------------


@settings(max_examples=40, deadline=None)
@given(triples(), st.integers(-9, 9))
def test_ring_axioms_hold_exactly_on_integers(abc: list[Series], n: int) -> None:
    a, b, c = abc
    zero, one = a.algebra.constant(0.0), a.algebra.constant(1.0)
    assert same(a + b, b + a) and same((a + b) + c, a + (b + c))
    assert same(a * b, b * a) and same((a * b) * c, a * (b * c))
    assert same(a * (b + c), a * b + a * c)
    assert same(a + zero, a) and same(a * one, a) and same(a - a, zero) and same(-a + a, zero)
    assert same(a - b, -(b - a))
    constant = a.algebra.constant(float(n))
    assert same(a + n, a + constant) and same(n + a, a + constant)
    assert same(a * n, a * constant) and same(n * a, a * constant)
    assert same(a - n, a - constant) and same(n - a, constant - a)


@settings(max_examples=30, deadline=None)
@given(triples())
def test_product_is_the_truncated_product_of_polynomials(abc: list[Series]) -> None:
    a, b, _ = abc
    exponents = a.algebra.exponents
    expected = dict.fromkeys(exponents, 0)
    for ea, va in zip(exponents, digits(a), strict=True):
        for eb, vb in zip(exponents, digits(b), strict=True):
            together = tuple(i + j for i, j in zip(ea, eb, strict=True))
            if together in expected:
                expected[together] += int(va) * int(vb)
    assert digits(a * b).tolist() == [expected[e] for e in exponents]
    if a.algebra.variables == 1:
        assert np.array_equal(digits(a * b), np.convolve(digits(a), digits(b))[: LINE.length])


def test_product_of_several_variables_is_that_of_sympy() -> None:
    for algebra in (PLANE, SPACE):
        x = X[: algebra.variables]
        first, second = (1 + 2 * x[0] - x[1]) ** 2, 3 - x[0] * x[1] + sum(x) ** 2
        product = sympy.Poly(sympy.expand(first * second), *x)
        ours = _from_sympy(algebra, first) * _from_sympy(algebra, second)
        for exponent, value in zip(algebra.exponents, digits(ours), strict=True):
            assert value == int(product.coeff_monomial(exponent))


def _from_sympy(algebra: SeriesAlgebra, e: sympy.Expr) -> Series:
    """The polynomial e in the algebra's coordinates, built by running it as a program."""
    coordinates = {X[j].name: algebra.variable(j, 0.0) for j in range(algebra.variables)}
    (value,) = compile_expressions([e]).run(coordinates, series_arithmetic())
    return value


@settings(max_examples=30, deadline=None)
@given(triples(least=-3, most=3), st.integers(0, 4))
def test_integer_powers_are_repeated_products(abc: list[Series], n: int) -> None:
    a = abc[0]
    product = a.algebra.constant(1.0)
    for _ in range(n):
        product = product * a
    assert same(power(a, n) * a.algebra.constant(1.0), product) if n else power(a, 0) == 1.0


def test_powers_of_a_binomial_are_binomial_coefficients() -> None:
    t = SeriesAlgebra(1, 12).variable(0, 0.0)
    for n in (1, 5, 12, 20):
        assert digits(power(1 + t, n)).tolist() == [math.comb(n, k) for k in range(13)]
        negative = [(-1) ** k * math.comb(n + k - 1, k) for k in range(13)]
        assert digits(power(1 + t, -n)) == pytest.approx(negative, rel=1e-13)


# ---- inverse and elementary functions ----------------------------------------------------------


@settings(max_examples=30, deadline=None)
@given(triples(least=-3, most=3), st.sampled_from([-8.0, -2.0, 0.5, 4.0]))
def test_inverse_times_itself_is_one(abc: list[Series], first: float) -> None:
    a = Series(abc[0].algebra, abc[0].coefficients.at[0].set(first))
    one = np.zeros(a.algebra.length)
    one[0] = 1.0
    inverse = ts.inverse(a)
    # rounding of each coefficient of the product is relative to the sum of the moduli of its terms
    moduli = digits(made(a.algebra, abs(digits(a))) * made(a.algebra, abs(digits(inverse))))
    assert (abs(digits(a * inverse) - one) <= 1e-15 * a.algebra.length * moduli + 1e-300).all()


def test_small_high_order_coefficients_keep_their_digits() -> None:
    """1/(1 - t/1000) and its logarithm: coefficients down to 1e-120, each relatively accurate."""
    algebra = SeriesAlgebra(1, 40)
    a = 1 - algebra.variable(0, 0.0) * 1e-3
    k = np.arange(1, 41)
    assert digits(ts.inverse(a))[1:] == pytest.approx(1e-3**k, rel=1e-13, abs=0.0)
    assert digits(ts.logarithm(a))[1:] == pytest.approx(-(1e-3**k) / k, rel=1e-13, abs=0.0)
    assert digits(ts.exponential(-a))[1:] == pytest.approx(
        [math.exp(-1) * 1e-3**j / math.factorial(j) for j in range(1, 41)], rel=1e-13, abs=0.0
    )


FUNCTIONS: list[tuple[str, Callable[[Series], Series], Callable]] = [
    ("inverse", ts.inverse, lambda v: 1 / v),
    ("exp", ts.exponential, mpmath.exp),
    ("log", ts.logarithm, mpmath.log),
    ("sqrt", ts.root, mpmath.sqrt),
    ("sin", ts.sine, mpmath.sin),
    ("cos", ts.cosine, mpmath.cos),
    ("tan", ts.tangent, mpmath.tan),
    ("power -3", lambda a: power(a, -3), lambda v: v**-3),
    ("power 5", lambda a: power(a, 5), lambda v: v**5),
]


@pytest.mark.parametrize("case", FUNCTIONS, ids=lambda c: c[0])
@pytest.mark.parametrize("first", [0.3, 1.0, 2.5])
def test_functions_of_one_variable_have_the_taylor_coefficients_of_the_composition(case: tuple, first: float) -> None:
    _, ours, reference = case
    a = [first, -0.7, 0.4, 1.3, 0.0, -0.2, 0.9, 0.1]
    algebra = SeriesAlgebra(1, 7)
    with mpmath.workdps(60):
        expected = mpmath.taylor(lambda t: reference(mpmath.polyval([mpmath.mpf(c) for c in a[::-1]], t)), 0, 7)
        expected = np.array([float(mpmath.re(c)) for c in expected])
    assert digits(ours(made(algebra, a))) == pytest.approx(expected, rel=1e-12, abs=1e-13 * np.abs(expected).max())


SYMBOLIC = [
    ("inverse", ts.inverse, lambda v: 1 / v), ("exp", ts.exponential, sympy.exp), ("log", ts.logarithm, sympy.log),
    ("sqrt", ts.root, sympy.sqrt), ("sin", ts.sine, sympy.sin), ("cos", ts.cosine, sympy.cos), ("tan", ts.tangent, sympy.tan),
]


@pytest.mark.parametrize("case", SYMBOLIC, ids=lambda c: c[0])
@pytest.mark.parametrize("algebra", [PLANE, SPACE], ids=label)
def test_functions_of_several_variables_have_the_derivatives_of_sympy(case: tuple, algebra: SeriesAlgebra) -> None:
    _, ours, reference = case
    x = X[: algebra.variables]
    inner = sympy.Rational(5, 4) + x[0] / 2 - 2 * x[1] + x[0] * x[1] - x[-1] ** 2 / 3
    value = digits(ours(_from_sympy(algebra, inner)))
    outer = reference(inner)
    for exponent, coefficient in zip(algebra.exponents, value, strict=True):
        steps = [(v, k) for v, k in zip(x, exponent, strict=True) if k]
        derivative = outer.diff(*steps) if steps else outer
        exact = derivative.subs(dict.fromkeys(x, 0)) / math.prod(math.factorial(k) for k in exponent)
        assert coefficient == pytest.approx(float(exact), rel=1e-12, abs=1e-13)


@settings(max_examples=20, deadline=None)
@given(triples(least=-2, most=2), st.sampled_from([0.5, 1.25, 3.0]))
def test_functional_identities(abc: list[Series], first: float) -> None:
    a, b = (Series(s.algebra, (s.coefficients / 2).at[0].set(first)) for s in abc[:2])

    def close(left: Series, right: Series) -> bool:
        size = max(np.abs(digits(right)).max(), 1.0)
        return bool(np.allclose(digits(left), digits(right), rtol=0, atol=1e-11 * size))

    one = a.algebra.constant(1.0)
    assert close(ts.exponential(ts.logarithm(a)), a)
    assert close(ts.logarithm(ts.exponential(a)), a)
    assert close(ts.root(a) * ts.root(a), a)
    assert close(ts.sine(a) * ts.sine(a) + ts.cosine(a) * ts.cosine(a), one)
    assert close(ts.exponential(a + b), ts.exponential(a) * ts.exponential(b))
    assert close(ts.logarithm(a * b), ts.logarithm(a) + ts.logarithm(b))


def test_fractional_and_symbolic_exponents_run_on_series() -> None:
    """(1 + t)^q = sum_k binomial(q, k) t^k."""
    q, base = sympy.symbols("q base")
    t = SeriesAlgebra(1, 8).variable(0, 0.0)
    program = compile_expressions([base ** sympy.Rational(2, 3), base**q, base ** sympy.Rational(1, 2)])
    values = program.run({"base": 1 + t, "q": -0.4}, series_arithmetic())
    for value, exponent in zip(values, (2 / 3, -0.4, 0.5), strict=True):
        expected = [float(sympy.binomial(exponent, k)) for k in range(9)]
        assert digits(value) == pytest.approx(expected, rel=1e-12)


def test_plain_numbers_stay_plain_in_the_arithmetic() -> None:
    arithmetic = series_arithmetic()
    for name, reference in [("exp", math.exp), ("log", math.log), ("sqrt", math.sqrt), ("sin", math.sin),
                            ("cos", math.cos), ("tan", math.tan), ("gamma", math.gamma)]:  # fmt: skip
        assert float(arithmetic.functions[name](1.7)) == pytest.approx(reference(1.7), rel=1e-14)
    assert arithmetic.power(2.0, -3) == 0.125 and arithmetic.power(2.0, 10) == 1024.0
    assert arithmetic.rational(1, 3) == 1 / 3 and arithmetic.pi() == math.pi


def test_series_of_degree_zero_are_numbers() -> None:
    algebra = SeriesAlgebra(1, 0)
    assert algebra.length == 1
    a = algebra.variable(0, 2.0)
    assert digits(a).tolist() == [2.0] and digits(ts.inverse(a)).tolist() == [0.5]
    assert digits(ts.logarithm(a))[0] == pytest.approx(math.log(2))
    assert digits(a.derivative((1,))).tolist() == [0.0]


# ---- derivatives -------------------------------------------------------------------------------


@settings(max_examples=30, deadline=None)
@given(triples(), st.data())
def test_derivative_is_that_of_the_polynomial(abc: list[Series], data: st.DataObject) -> None:
    a = abc[0]
    algebra = a.algebra
    orders = tuple(data.draw(st.integers(0, 2)) for _ in range(algebra.variables))
    x = X[: algebra.variables]
    polynomial = sum(int(c) * math.prod(v**k for v, k in zip(x, e, strict=True))
                     for e, c in zip(algebra.exponents, digits(a), strict=True))  # fmt: skip
    derivative = sympy.sympify(polynomial)
    for v, k in zip(x, orders, strict=True):
        derivative = derivative.diff(v, k)
    exact = sympy.Poly(derivative, *x)
    assert digits(a.derivative(orders)).tolist() == [int(exact.coeff_monomial(e)) for e in algebra.exponents]


@settings(max_examples=25, deadline=None)
@given(triples())
def test_derivative_obeys_the_product_rule_below_the_last_degree(abc: list[Series]) -> None:
    a, b, _ = abc
    first = (1,) + (0,) * (a.algebra.variables - 1)
    known = a.algebra.degrees < a.algebra.degree  # the last degree of a derivative is cut off
    left = digits((a * b).derivative(first))
    right = digits(a.derivative(first) * b + a * b.derivative(first))
    assert np.array_equal(left[known], right[known])
    assert (left[~known] == 0).all()


@pytest.mark.parametrize("algebra", ALGEBRAS, ids=label)
@pytest.mark.parametrize("name", ["inverse", "exp", "log", "sqrt", "tan"])
def test_automatic_differentiation_goes_through_the_functions(algebra: SeriesAlgebra, name: str) -> None:
    """Forward and reverse mode agree with each other, and with central differences of order h^4."""
    ours = {n: f for n, f, _ in FUNCTIONS}[name]
    point = np.random.default_rng(7).uniform(-0.5, 0.5, algebra.length)
    point[0] = 1.2

    def f(c):  # type: ignore[no-untyped-def]
        return ours(Series(algebra, c)).coefficients

    forward, backward = jax.jacfwd(f)(jnp.asarray(point)), jax.jacrev(f)(jnp.asarray(point))
    h = 3e-4
    columns = []
    for unit in np.eye(algebra.length):
        below, low, high, above = (np.asarray(f(jnp.asarray(point + k * h * unit))) for k in (-2, -1, 1, 2))
        columns.append((below - 8 * low + 8 * high - above) / (12 * h))
    differences = np.array(columns).T
    size = np.abs(differences).max()
    assert np.allclose(forward, differences, rtol=0, atol=1e-8 * size)
    assert np.allclose(backward, forward, rtol=0, atol=1e-13 * size)


@pytest.mark.parametrize("algebra", [LINE, PLANE], ids=label)
def test_inverse_can_be_differentiated_twice_and_vectorised(algebra: SeriesAlgebra) -> None:
    """d^2(1/a)[h, k] = 2 h k/a^3, in the ring itself."""
    rng = np.random.default_rng(11)
    a, h, k = (made(algebra, rng.uniform(-0.5, 0.5, algebra.length)) for _ in range(3))
    a = a + 2.0

    def f(c):  # type: ignore[no-untyped-def]
        return ts.inverse(Series(algebra, c)).coefficients

    second = jax.jacfwd(jax.jacfwd(f))(a.coefficients)
    ours = np.einsum("kij,i,j->k", np.asarray(second), digits(h), digits(k))
    assert ours == pytest.approx(digits(2 * h * k * power(ts.inverse(a), 3)), rel=1e-11, abs=1e-13)
    batch = jnp.stack([a.coefficients, 2 * a.coefficients, a.coefficients.at[0].set(-3.0)])
    assert np.array_equal(jax.vmap(f)(batch), jnp.stack([f(c) for c in batch]))
