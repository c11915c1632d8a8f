"""Truncated series in one variable over the exact rationals (python-flint), for flows that are rational."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from frg.language.program import Arithmetic


class ExactSeries:
    """c_0 + c_1 t + ... + c_(L-1) t^(L-1) with fmpq coefficients. Division needs c_0 != 0.

    The length is carried by the object: flint's own global series length is never used."""

    __slots__ = ("coefficients",)

    def __init__(self, coefficients: list[Any]):
        self.coefficients = coefficients

    @classmethod
    def of(cls, values: list[Any]) -> ExactSeries:
        return cls([rational(v) for v in values])

    def _pad(self, other: Any) -> ExactSeries:
        if isinstance(other, ExactSeries):
            return other
        zero = rational(0)
        return ExactSeries([rational(other)] + [zero] * (len(self.coefficients) - 1))

    def __add__(self, other: Any) -> ExactSeries:
        pairs = zip(self.coefficients, self._pad(other).coefficients, strict=True)
        return ExactSeries([a + b for a, b in pairs])

    __radd__ = __add__

    def __mul__(self, other: Any) -> ExactSeries:
        if not isinstance(other, ExactSeries):
            factor = rational(other)
            return ExactSeries([a * factor for a in self.coefficients])
        a, b = self.coefficients, other.coefficients
        return ExactSeries(
            [sum((a[i] * b[k - i] for i in range(k + 1)), rational(0)) for k in range(len(a))]
        )

    __rmul__ = __mul__

    def __neg__(self) -> ExactSeries:
        return ExactSeries([-a for a in self.coefficients])

    def __sub__(self, other: Any) -> ExactSeries:
        return self + (-self._pad(other))

    def __rsub__(self, other: Any) -> ExactSeries:
        return (-self) + other

    def inverse(self) -> ExactSeries:
        """Raises ZeroDivisionError where c_0 = 0."""
        a = self.coefficients
        b = [1 / a[0]]
        for k in range(1, len(a)):
            b.append(-sum((a[i] * b[k - i] for i in range(1, k + 1)), rational(0)) / a[0])
        return ExactSeries(b)

    def derivative(self, order: int) -> ExactSeries:
        """The derivative, with zeros where it would need coefficients beyond the length."""
        current = self.coefficients
        for _ in range(order):
            current = [k * current[k] for k in range(1, len(current))] + [rational(0)]
        return ExactSeries(current)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, ExactSeries) and self.coefficients == other.coefficients

    def __hash__(self) -> int:
        return hash(tuple((int(c.p), int(c.q)) for c in self.coefficients))


def rational(value: Any) -> Any:
    """An fmpq from an int, a Fraction, a sympy Rational or an fmpq; floats are refused."""
    import flint

    if isinstance(value, flint.fmpq):
        return value
    if isinstance(value, Fraction):
        return flint.fmpq(value.numerator, value.denominator)
    if isinstance(value, int):
        return flint.fmpq(value)
    if getattr(value, "is_Rational", False):
        return flint.fmpq(int(value.p), int(value.q))
    raise TypeError(f"{value!r} is not an exact rational")


def exact_arithmetic() -> Arithmetic:
    """Ring operations and integer powers only; no elementary function is rational."""
    return Arithmetic(
        rational=lambda p, q: rational(Fraction(p, q)), real=_refuse_float, pi=_refuse_pi,
        power=_power, functions={},
    )


def _refuse_float(value: float) -> Any:
    raise TypeError(f"the float {value!r} has no place in exact arithmetic")


def _refuse_pi() -> Any:
    raise TypeError("pi is not rational")


def _power(a: Any, n: int) -> Any:
    if n < 0:
        return _power(a.inverse() if isinstance(a, ExactSeries) else 1 / a, -n)
    result: Any = None
    while n:
        if n % 2:
            result = a if result is None else result * a
        n //= 2
        a = a * a if n else a
    return rational(1) if result is None else result


def series_environment(name: str, series: ExactSeries, highest: int) -> Mapping[str, ExactSeries]:
    """Jets of a function given as an exact series, by symbol name."""
    from frg.derive import symbols

    return {symbols.jet(name, (k,)).name: series.derivative(k) for k in range(highest + 1)}
