"""Expression trees as straight-line programs that run on any kind of number.

No source text is generated and nothing is evaluated as code: the sympy tree is flattened into a
list of operations once, and the list is then replayed with the operators of whatever numbers are passed in
(floats, mpmath numbers, jax arrays, truncated series, balls, exact rationals).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from frg.errors import FrgError

if TYPE_CHECKING:
    import sympy

# Operations by opcode: ("symbol", name) | ("constant", p, q) | ("float", value) | ("pi",)
# | ("add", slots) | ("mul", slots) | ("power", slot, int) | ("root", slot, p, q)
# | ("call", function name, slots) | ("general power", slot, slot)
Operation = tuple


@dataclass(frozen=True)
class Program:
    """A list of operations, and the slots of the results. Immutable; made by `compile_expressions`."""

    operations: tuple[Operation, ...]
    results: tuple[int, ...]

    @property
    def symbols(self) -> frozenset[str]:
        return frozenset(op[1] for op in self.operations if op[0] == "symbol")

    def run(self, values: Mapping[str, Any], arithmetic: Arithmetic) -> list[Any]:
        """Replay with `values` for the symbols; every other choice is the arithmetic's."""
        slots: list[Any] = []
        for op in self.operations:
            slots.append(_execute(op, slots, values, arithmetic))
        return [slots[i] for i in self.results]


@dataclass(frozen=True, kw_only=True)
class Arithmetic:
    """What a number system adds to the operators + and *: constants, powers, elementary functions.

    `rational(p, q)` embeds p/q; `real(value)` a float; `pi()` the constant; `power(x, n)` an integer power (n may be
    negative); `functions` maps names (exp, log, sqrt, sin, cos, tan, gamma, zeta) to callables."""

    rational: Callable[[int, int], Any]
    real: Callable[[float], Any]
    pi: Callable[[], Any]
    power: Callable[[Any, int], Any]
    functions: Mapping[str, Callable[..., Any]]


def _execute(op: Operation, slots: list[Any], values: Mapping[str, Any], a: Arithmetic) -> Any:
    code = op[0]
    if code == "symbol":
        return values[op[1]]
    if code == "constant":
        return a.rational(op[1], op[2])
    if code == "float":
        return a.real(op[1])
    if code == "pi":
        return a.pi()
    if code == "add":
        total = slots[op[1][0]]
        for i in op[1][1:]:
            total = total + slots[i]
        return total
    if code == "mul":
        product = slots[op[1][0]]
        for i in op[1][1:]:
            product = product * slots[i]
        return product
    if code == "power":
        return a.power(slots[op[1]], op[2])
    if code == "root":
        return _function(a, "exp")(_function(a, "log")(slots[op[1]]) * a.rational(op[2], op[3]))
    if code == "general power":
        return _function(a, "exp")(_function(a, "log")(slots[op[1]]) * slots[op[2]])
    return _function(a, op[1])(*(slots[i] for i in op[2]))


def _function(arithmetic: Arithmetic, name: str) -> Callable[..., Any]:
    try:
        return arithmetic.functions[name]
    except KeyError:
        raise FrgError(f"this number system does not offer the function {name}") from None


def compile_expressions(expressions: Sequence[sympy.Expr]) -> Program:
    """Flatten sympy trees into one program; equal subtrees are computed once.

    Raises `FrgError` for a node that has no operation (an undefined function, a derivative)."""
    builder = _Builder()
    results = tuple(builder.slot(e) for e in expressions)
    return Program(tuple(builder.operations), results)


class _Builder:
    def __init__(self) -> None:
        self.operations: list[Operation] = []
        self.known: dict[Operation, int] = {}
        self.seen: dict[Any, int] = {}

    def emit(self, op: Operation) -> int:
        if op not in self.known:
            self.known[op] = len(self.operations)
            self.operations.append(op)
        return self.known[op]

    def slot(self, e: sympy.Expr) -> int:
        if e not in self.seen:
            self.seen[e] = self.emit(self._operation(e))
        return self.seen[e]

    def _operation(self, e: sympy.Expr) -> Operation:
        import sympy

        if e.is_Symbol:
            return ("symbol", e.name)
        if e.is_Rational:
            return ("constant", int(e.p), int(e.q))
        if e.is_Float:
            return ("float", float(e))
        if e is sympy.pi:
            return ("pi",)
        if e is sympy.E:
            return ("call", "exp", (self.emit(("constant", 1, 1)),))
        if e.is_Add or e.is_Mul:
            return ("add" if e.is_Add else "mul", tuple(self.slot(x) for x in e.args))
        if e.is_Pow:
            base, exponent = e.base, e.exp
            if exponent.is_Integer:
                return ("power", self.slot(base), int(exponent))
            if exponent == sympy.Rational(1, 2):
                return ("call", "sqrt", (self.slot(base),))
            if exponent.is_Rational:
                return ("root", self.slot(base), int(exponent.p), int(exponent.q))
            return ("general power", self.slot(base), self.slot(exponent))
        if isinstance(e, sympy.Function) and type(e).__name__ in _CALLS:
            return ("call", type(e).__name__, tuple(self.slot(x) for x in e.args))
        raise FrgError(f"no numerical meaning for {e!s}")


_CALLS = frozenset({"exp", "log", "sqrt", "sin", "cos", "tan", "gamma", "zeta"})
