"""Arithmetic on sympy trees that cannot hang: every step is bounded before it is taken.

sympy evaluates numbers eagerly: 9^9^9, gamma(10^9) or exp(10^6*log(3)) would fill the memory. Text
from a file, and parameters put into expressions, go through `SafeAlgebra` only. A step that is refused
raises `Refused`; whoever knows the place turns it into an `InputError`.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import sympy

LARGEST_EXPONENT = 1000
LARGEST_GAMMA_ARGUMENT = 170
LARGEST_DECIMAL_EXPONENT = 300
NUMBER_BITS = 2048  # of one exact number
TOTAL_BITS = 16384  # of all exact numbers met in one expression together
LARGEST_ROOT = 10_000
MOST_NODES = 5000
TAME_NODES = 80
TAME_HEIGHT = 3
TAME_EXPONENT = 16
ROOT_BITS = 256  # of a number under a root: sympy tries to factor it

_TOO_LARGE = "keep numbers below 1e300 in size and exponents below 1000"


# What sympy raises where it loses itself in an expression that no one would write on purpose.
GIVING_UP = (ArithmeticError, AttributeError, NotImplementedError, RecursionError, TypeError, ValueError)


class Refused(Exception):
    """A step that would be undefined, not real, or too large; with its remedy."""

    def __init__(self, message: str, remedy: str):
        super().__init__(message)
        self.message = message
        self.remedy = remedy


class SafeAlgebra:
    """Sums, products, powers and functions within a budget of digits; one object an expression."""

    def __init__(self) -> None:
        self._bits_left = TOTAL_BITS
        self._root = 1  # common multiple of the denominators in exponents of numbers

    def number(self, text: str) -> sympy.Rational:
        """An unsigned decimal literal as an exact rational."""
        import sympy

        mantissa, _, exponent = text.lower().replace("_", "").partition("e")
        whole, _, fraction = mantissa.partition(".")
        power = (int(exponent) if len(exponent) < 8 else LARGEST_DECIMAL_EXPONENT + 1) if exponent else 0
        if abs(power) > LARGEST_DECIMAL_EXPONENT or len(whole) > LARGEST_DECIMAL_EXPONENT:
            raise Refused("the number is too large or too small", _TOO_LARGE)
        if len(fraction) > LARGEST_DECIMAL_EXPONENT:
            raise Refused("the number has too many digits", "keep fewer than 300 digits")
        power -= len(fraction)
        digits = int((whole + fraction) or "0")
        value = sympy.Rational(digits * 10 ** max(power, 0), 10 ** max(-power, 0))
        self._spend(_bits_of(value))
        return value

    def add(self, terms: Sequence[sympy.Expr]) -> sympy.Expr:
        import sympy

        return _finite(sympy.Add(*terms)) if len(terms) > 1 else terms[0]

    def multiply(self, factors: Sequence[sympy.Expr]) -> sympy.Expr:
        import sympy

        return _finite(sympy.Mul(*factors)) if len(factors) > 1 else factors[0]

    def power(self, base: sympy.Expr, exponent: sympy.Expr) -> sympy.Expr:
        import sympy

        if largest_number(exponent) > LARGEST_EXPONENT:
            raise Refused(f"the exponent is larger than {LARGEST_EXPONENT}", _TOO_LARGE)
        base_value, value = constant_value(base), constant_value(exponent)
        if value is not None and abs(value) > LARGEST_EXPONENT:
            raise Refused(f"the exponent is larger than {LARGEST_EXPONENT}", _TOO_LARGE)
        if base == 0 and value is not None and value < 0:
            raise Refused("division by zero", "check the denominator")
        if base_value is not None and value is not None:
            _float_power(base_value, value)
        if value is not None:
            bits = _bits_outside_sums(base)
            if not exponent.is_Integer and bits > ROOT_BITS:
                raise Refused("the number under the root has too many digits", "use a number with fewer digits")
            self._spend(bits * math.ceil(abs(value)))
        self._count_root(base, exponent)
        if not (exponent.is_Integer or (_tame(base) and _tame(exponent))):
            raise Refused(
                "powers and functions are nested too deeply around a power that is no whole number",
                "simplify the expression",
            )
        return _finite(sympy.Pow(base, exponent))

    def call(self, name: str, argument: sympy.Expr) -> sympy.Expr:
        """An elementary function by name; poles, complex values and overflow are refused."""
        import sympy

        if name == "sqrt":
            return self.power(argument, sympy.Rational(1, 2))
        value = constant_value(argument)
        if value is not None:
            _float_call(name, value)
        if name == "exp" and argument.has(sympy.log):
            # exp(c*log(x)) becomes x^c at once
            self._check_exponent_of_log(argument)
        result = getattr(sympy, name)(argument)
        if name == "tan":  # tan(x + pi/2) comes back as -cot(x), which is no word of the language
            result = result.replace(sympy.cot, lambda a: 1 / sympy.tan(a))
        if value is not None:
            self._spend(sum(_bits_of(a) for a in result.atoms(sympy.Rational)))
        return _finite(result)

    def _check_exponent_of_log(self, argument: sympy.Expr) -> None:
        largest = largest_number(argument, outside_logs=True)
        if largest > LARGEST_EXPONENT:
            raise Refused(f"the exponent is larger than {LARGEST_EXPONENT}", _TOO_LARGE)
        self._spend(_all_bits(argument) * math.ceil(largest))
        self._count_root(argument, argument)

    def _count_root(self, base: sympy.Expr, exponent: sympy.Expr) -> None:
        """Refuse roots like 12^(1/99991): sympy works with integers as large as 12^99991 there.

        Exponents of a number multiply in (b^e)^f and add in b^e*b^f, so their denominators are counted
        together over the whole expression."""
        denominator = _denominator(exponent)
        if denominator > 1 and _all_bits(base):
            self._root = math.lcm(self._root, denominator * _denominator(base))
            if self._root > LARGEST_ROOT:
                raise Refused(
                    "the roots of numbers in this expression are too high",
                    "use exponents with small denominators",
                )

    def _spend(self, bits: int) -> None:
        self._bits_left -= bits
        if bits > NUMBER_BITS or self._bits_left < 0:
            raise Refused("the exact numbers in this expression have too many digits", _TOO_LARGE)


def substitute(expression: sympy.Expr, values: Mapping[str, sympy.Expr]) -> sympy.Expr:
    """Put `values` in for symbols by name, rebuilding the tree with bounded steps.

    Arguments of running functions are treated too; a derivative keeps its variables. Raises `Refused`, also
    where the result would have more than 5000 nodes (definitions of definitions grow like powers)."""
    if _nodes(expression, {name: _nodes(value) for name, value in values.items()}) > MOST_NODES:
        raise Refused("with everything put in, the expression becomes too large", "use fewer nested definitions")
    try:
        return _substitute(expression, values, SafeAlgebra())
    except GIVING_UP:
        raise Refused("the expression is too complicated", "simplify its numbers and powers") from None


def _substitute(e: sympy.Expr, values: Mapping[str, sympy.Expr], algebra: SafeAlgebra) -> sympy.Expr:
    import sympy

    if e.is_Symbol:
        return values.get(e.name, e)
    if not e.args or not any(s.name in values for s in e.free_symbols) or isinstance(e, sympy.Derivative):
        return e
    args = [_substitute(a, values, algebra) for a in e.args]
    if e.is_Add:
        return algebra.add(args)
    if e.is_Mul:
        return algebra.multiply(args)
    if e.is_Pow:
        return algebra.power(args[0], args[1])
    if isinstance(e, sympy.core.function.AppliedUndef):
        return e.func(*args)
    name = type(e).__name__
    if len(args) == 1 and name in _FLOAT_FUNCTIONS:
        return algebra.call(name, args[0])
    raise Refused(f"{name} is no function of the language", "use sqrt, exp, log, sin, cos, tan, gamma, zeta")


def check_result(expression: sympy.Expr) -> None:
    """Refuse what slipped through step by step: numbers beyond a double, huge powers, complex or infinite."""
    import sympy

    for node in sympy.preorder_traversal(expression):
        if node in (sympy.I, sympy.zoo, sympy.nan, sympy.oo, -sympy.oo):
            raise Refused("the expression is not a real finite number", "check for roots of negative numbers and poles")
        # numerator and denominator of what is printed must be readable as literals
        if node.is_Rational and max(abs(int(node.p)), int(node.q)) >= 10**LARGEST_DECIMAL_EXPONENT:
            raise Refused("a number in the expression has too many digits", _TOO_LARGE)
        if node.is_Pow and largest_number(node.exp) > LARGEST_EXPONENT:
            raise Refused(f"the exponent is larger than {LARGEST_EXPONENT}", _TOO_LARGE)


def constant_value(e: sympy.Expr) -> float | None:
    """The double nearest to an expression without names, None where it has names.

    Raises `Refused` for an undefined or overflowing value."""
    import sympy

    if e.free_symbols or e.atoms(sympy.core.function.AppliedUndef):
        return None
    return _value(e)


def _value(e: sympy.Expr) -> float:
    import sympy

    if e.is_Number:
        try:
            value = float(e)
        except (OverflowError, ValueError):
            value = math.inf
        return _bounded(value)
    if e is sympy.pi:
        return math.pi
    if e is sympy.E:
        return math.e
    values = [_value(a) for a in e.args]
    if e.is_Add:
        return _bounded(math.fsum(values))
    if e.is_Mul:
        return _bounded(math.prod(values))
    if e.is_Pow:
        return _float_power(values[0], values[1])
    name = type(e).__name__
    if len(values) == 1 and name in _FLOAT_FUNCTIONS:
        return _float_call(name, values[0])
    raise Refused(f"{e} is not a real finite number", "check for roots of negative numbers and poles")


def _bounded(value: float) -> float:
    if not math.isfinite(value):
        raise Refused("the value is too large for a double or undefined", _TOO_LARGE)
    return value


def _float_power(base: float, exponent: float) -> float:
    try:
        value = base**exponent
    except ZeroDivisionError:
        raise Refused("division by zero", "check the denominator") from None
    except OverflowError:
        raise Refused("the power is too large for a double", _TOO_LARGE) from None
    if isinstance(value, complex):
        raise Refused("a fractional power of a negative number is not real", "check the sign of the base")
    return _bounded(value)


def _zeta(x: float) -> float:
    import mpmath

    return float(mpmath.zeta(x))


_FLOAT_FUNCTIONS = {
    "exp": math.exp,
    "log": math.log,
    "sin": math.sin,
    "cos": math.cos,
    "tan": math.tan,
    "gamma": math.gamma,
    "zeta": _zeta,
}


def _float_call(name: str, x: float) -> float:
    if name in ("gamma", "zeta") and abs(x) > LARGEST_GAMMA_ARGUMENT:
        raise Refused(
            f"the argument {x:g} of {name} is too large",
            f"keep it between -{LARGEST_GAMMA_ARGUMENT} and {LARGEST_GAMMA_ARGUMENT}",
        )
    try:
        return _bounded(_FLOAT_FUNCTIONS[name](x))
    except (ValueError, ZeroDivisionError):
        raise Refused(f"{name} has no finite real value at {x:g}", "keep away from poles and branch cuts") from None
    except OverflowError:
        raise Refused(f"{name}({x:g}) is too large for a double", _TOO_LARGE) from None


def _tame(e: sympy.Expr) -> bool:
    """Small, with small powers, hardly nested. sympy looks for the real and imaginary parts of the base of a
    fractional power, which would take it for ever otherwise."""
    return _nodes(e) <= TAME_NODES and _height(e) <= TAME_HEIGHT


def _nodes(e: sympy.Expr, sizes: Mapping[str, int] | None = None) -> int:
    """The number of nodes, with symbols counted as `sizes` says: the size after a substitution."""
    if sizes is not None and e.is_Symbol:
        return sizes.get(e.name, 1)
    return 1 + sum(_nodes(a, sizes) for a in e.args)


def _height(e: sympy.Expr) -> int:
    """How deep powers and functions are nested; a high whole power counts as too deep."""
    if e.is_Pow and e.exp.is_Integer and abs(e.exp) > TAME_EXPONENT:
        return TAME_HEIGHT + 1
    inner = max((_height(a) for a in e.args), default=0)
    return inner + bool(e.is_Pow or e.is_Function)


def _finite(e: sympy.Expr) -> sympy.Expr:
    import sympy

    if e in (sympy.zoo, sympy.nan, sympy.oo, -sympy.oo):
        raise Refused("the value is infinite or undefined", "check denominators and poles")
    return e


def largest_number(e: sympy.Expr, *, outside_logs: bool = False) -> float:
    """The largest absolute value of any exact number in the tree; 0 without one."""
    if e.is_Rational:
        # an integer division: the quotient of two huge integers is no double
        return float(min(abs(int(e.p)) // int(e.q) + (e.q != 1), 10**300))
    if outside_logs and type(e).__name__ == "log":
        return 1.0
    return max((largest_number(a, outside_logs=outside_logs) for a in e.args), default=0.0)


def _bits_of(number: sympy.Expr) -> int:
    p, q = abs(int(number.p)), int(number.q)
    return (p.bit_length() if p > 1 else 0) + (q.bit_length() if q > 1 else 0)


def _denominator(e: sympy.Expr) -> int:
    return int(e.q) if e.is_Rational else math.lcm(*(_denominator(a) for a in e.args))


def _all_bits(e: sympy.Expr) -> int:
    return _bits_of(e) if e.is_Rational else sum(_all_bits(a) for a in e.args)


def _bits_outside_sums(e: sympy.Expr) -> int:
    # a power of a sum is kept as it is; only factors of a product are raised one by one
    if e.is_Rational:
        return _bits_of(e)
    if e.is_Mul:
        return sum(_bits_outside_sums(a) for a in e.args)
    return _all_bits(e.base) if e.is_Pow and e.base.is_Rational else 0
