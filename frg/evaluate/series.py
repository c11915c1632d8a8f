"""Truncated power series in several variables, as jax arrays of coefficients.

A series of total degree <= D in m variables is the vector of its coefficients over the monomials in
graded order. Multiplication gathers the coefficients of the quotients k/i of monomials into a matrix and applies
it; for one variable this is the Toeplitz product. No FFT: its error is absolute, and the small
high-order coefficients are the ones that matter here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Any

import numpy as np

from frg.evaluate.jaxload import load
from frg.language.program import Arithmetic


def monomials(variables: int, degree: int) -> list[tuple[int, ...]]:
    """Exponents of all monomials up to a total degree, lowest degree first."""
    if variables == 0:
        return [()]
    found: list[tuple[int, ...]] = []
    for total in range(degree + 1):
        found.extend(_of_degree(variables, total))
    return found


def _of_degree(variables: int, total: int) -> list[tuple[int, ...]]:
    if variables == 1:
        return [(total,)]
    return [
        (first, *rest)
        for first in range(total, -1, -1)
        for rest in _of_degree(variables - 1, total - first)
    ]


@dataclass(frozen=True)
class SeriesAlgebra:
    """Number of variables and total degree; owns the index tables of the product."""

    variables: int
    degree: int

    @cached_property
    def exponents(self) -> list[tuple[int, ...]]:
        return monomials(self.variables, self.degree)

    @property
    def length(self) -> int:
        return len(self.exponents)

    @cached_property
    def index(self) -> dict[tuple[int, ...], int]:
        return {e: i for i, e in enumerate(self.exponents)}

    @cached_property
    def quotients(self) -> np.ndarray:
        """(L, L) index of monomial k divided by monomial i, L (a zero) where it does not divide."""
        table = np.full((self.length, self.length), self.length)
        for k, ek in enumerate(self.exponents):
            for i, ei in enumerate(self.exponents):
                quotient = tuple(a - b for a, b in zip(ek, ei, strict=True))
                if min(quotient) >= 0:
                    table[k, i] = self.index[quotient]
        return table

    @cached_property
    def degrees(self) -> np.ndarray:
        return np.array([sum(e) for e in self.exponents])

    def differentiation(self, orders: tuple[int, ...]) -> tuple[np.ndarray, np.ndarray]:
        """(source index, factor), both (L,): coefficient k of the derivative is factor * coefficient
        source; the source is L (a zero) where the derivative needs terms beyond the degree."""
        source, factor = np.full(self.length, self.length), np.zeros(self.length)
        for k, e in enumerate(self.exponents):
            raised = tuple(a + b for a, b in zip(e, orders, strict=True))
            if raised in self.index:
                source[k] = self.index[raised]
                factor[k] = math.prod(
                    math.factorial(r) // math.factorial(a) for r, a in zip(raised, e, strict=True)
                )
        return source, factor

    def constant(self, value: Any) -> Series:
        jnp = load().numpy
        return Series(self, jnp.zeros(self.length).at[0].set(value))

    def variable(self, which: int, at: Any) -> Series:
        """The coordinate itself, expanded about the point `at`."""
        series = self.constant(at)
        if self.degree == 0:
            return series
        unit = tuple(int(j == which) for j in range(self.variables))
        return Series(self, series.coefficients.at[self.index[unit]].set(1.0))


class Series:
    """One truncated power series. Operators accept series of the same algebra and plain scalars."""

    __slots__ = ("algebra", "coefficients")

    def __init__(self, algebra: SeriesAlgebra, coefficients: Any):
        self.algebra = algebra
        self.coefficients = coefficients

    def _with(self, coefficients: Any) -> Series:
        return Series(self.algebra, coefficients)

    def __add__(self, other: Any) -> Series:
        if isinstance(other, Series):
            return self._with(self.coefficients + other.coefficients)
        return self._with(self.coefficients.at[0].add(other))

    __radd__ = __add__

    def __neg__(self) -> Series:
        return self._with(-self.coefficients)

    def __sub__(self, other: Any) -> Series:
        return self + (-other)

    def __rsub__(self, other: Any) -> Series:
        return (-self) + other

    def __mul__(self, other: Any) -> Series:
        if isinstance(other, Series):
            return self._with(_multiply(self.algebra, self.coefficients, other.coefficients))
        return self._with(self.coefficients * other)

    __rmul__ = __mul__

    def derivative(self, orders: tuple[int, ...]) -> Series:
        if not any(orders):
            return self
        source, factor = self.algebra.differentiation(orders)
        return self._with(_padded(self.coefficients)[source] * factor)


def _padded(coefficients: Any) -> Any:
    jnp = load().numpy
    return jnp.concatenate([coefficients, jnp.zeros(1, coefficients.dtype)])


def _multiply(algebra: SeriesAlgebra, a: Any, b: Any) -> Any:
    # multiply-and-sum rather than a matrix product: XLA fuses it, and it has no batched library call
    jnp = load().numpy
    return jnp.sum(_padded(b)[algebra.quotients] * a, axis=-1)


@lru_cache(maxsize=64)
def _inverse_function(algebra: SeriesAlgebra) -> Any:
    """1/a by the recurrence  b_k = -(1/a_0) sum_(i > 0) a_i b_(k-i),  degree by degree, with the derivative
    rule d(1/a) = -da/a^2.

    Newton doubling would take fewer steps but loses digits in the second half of the last doubling, where it
    subtracts the large truncation garbage of the step before."""
    jax, jnp, lax = load()
    degrees = algebra.degrees

    def by_row(k: Any, state: Any) -> Any:
        a, b = state
        row = jnp.sum(_padded(b)[jnp.asarray(algebra.quotients)[k]] * a.at[0].set(0.0))
        return a, b.at[k].set(-row / a[0])

    def by_degree(k: Any, state: Any) -> Any:
        a, b = state
        rows = -_multiply(algebra, a.at[0].set(0.0), b) / a[0]
        return a, jnp.where(degrees == k, rows, b)

    @jax.custom_jvp
    def inverse(a: Any) -> Any:
        b = jnp.zeros_like(a).at[0].set(1.0 / a[0])
        if algebra.variables == 1:
            return lax.fori_loop(1, algebra.length, by_row, (a, b))[1]
        return lax.fori_loop(1, algebra.degree + 1, by_degree, (a, b))[1]

    @inverse.defjvp
    def inverse_jvp(primals: Any, tangents: Any) -> Any:
        (a,), (da,) = primals, tangents
        b = inverse(a)
        return b, -_multiply(algebra, _multiply(algebra, b, b), da)

    return inverse


def inverse(a: Series) -> Series:
    return Series(a.algebra, _inverse_function(a.algebra)(a.coefficients))


def logarithm(a: Series) -> Series:
    """ln a: with the degree operator E, E ln a = (E a)/a, coefficient by coefficient."""
    jnp = load().numpy
    degrees = a.algebra.degrees
    raised = Series(a.algebra, a.coefficients * degrees) * inverse(a)
    divided = raised.coefficients / np.where(degrees > 0, degrees, 1)
    return Series(a.algebra, divided.at[0].set(jnp.log(a.coefficients[0])))


def compose(a: Series, taylor: Any) -> Series:
    """f(a) from the Taylor coefficients f^(k)(a_0)/k!, k = 0..degree, by Horner's rule."""
    nilpotent = Series(a.algebra, a.coefficients.at[0].set(0.0))
    total = a.algebra.constant(taylor[a.algebra.degree])
    for k in range(a.algebra.degree - 1, -1, -1):
        total = total * nilpotent + taylor[k]
    return total


def exponential(a: Series) -> Series:
    jnp = load().numpy
    value = jnp.exp(a.coefficients[0])
    return compose(a, [value * (1.0 / math.factorial(k)) for k in range(a.algebra.degree + 1)])


def root(a: Series) -> Series:
    jnp = load().numpy
    first = a.coefficients[0]
    taylor, factor = [], jnp.sqrt(first)
    for k in range(a.algebra.degree + 1):
        taylor.append(factor)
        factor = factor * (0.5 - k) / (k + 1) / first
    return compose(a, taylor)


def sine(a: Series) -> Series:
    return _trigonometric(a, 0)


def cosine(a: Series) -> Series:
    return _trigonometric(a, 1)


def _trigonometric(a: Series, shift: int) -> Series:
    jnp = load().numpy
    x = a.coefficients[0]
    cycle = [jnp.sin(x), jnp.cos(x), -jnp.sin(x), -jnp.cos(x)]
    return compose(a, [cycle[(k + shift) % 4] * (1.0 / math.factorial(k)) for k in range(a.algebra.degree + 1)])


def tangent(a: Series) -> Series:
    return sine(a) * inverse(cosine(a))


def power(a: Any, n: int) -> Any:
    """Integer power by repeated squaring; negative powers through the inverse."""
    if n < 0:
        return power(reciprocal(a), -n)
    if n == 0:
        return 1.0
    result, square = None, a
    while True:
        if n % 2:
            result = square if result is None else result * square
        n //= 2
        if n == 0:
            return result
        square = square * square


def reciprocal(a: Any) -> Any:
    return inverse(a) if isinstance(a, Series) else 1.0 / a


def series_arithmetic() -> Arithmetic:
    """jax numbers, plain or truncated series: scalars stay scalars until they meet a series."""
    jnp = load().numpy

    def lift(on_series: Any, on_plain: Any) -> Any:
        return lambda x: on_series(x) if isinstance(x, Series) else on_plain(x)

    return Arithmetic(
        rational=lambda p, q: p / q,
        real=float,
        pi=lambda: math.pi,
        power=power,
        functions={
            "exp": lift(exponential, jnp.exp), "log": lift(logarithm, jnp.log),
            "sqrt": lift(root, jnp.sqrt), "sin": lift(sine, jnp.sin), "cos": lift(cosine, jnp.cos),
            "tan": lift(tangent, jnp.tan), "gamma": _scalar_gamma,
        },
    )


def _scalar_gamma(x: Any) -> Any:
    from jax.scipy.special import gamma

    return gamma(x)
