"""Flows given directly in the truncation file, with threshold functions l(n, w[, eta])."""

from __future__ import annotations

from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.equations import CouplingFlow, FlowEquations, FunctionFlow
from frg.derive.flat.potential import jets_in
from frg.derive.loops import LoopBook
from frg.errors import InputError, NotYet, Place
from frg.language.truncation import RunningCoupling, RunningFunction, Truncation

if TYPE_CHECKING:
    import sympy


def typed_flow(truncation: Truncation, book: LoopBook) -> FlowEquations:
    """Lower every typed right-hand side to jets and loops. Raises NotYet for a coupling whose flow
    contains a running function (it would need a point at which to read the function)."""
    functions = {f.name: f for f in truncation.running if isinstance(f, RunningFunction)}
    lowered = {
        name: _lower(truncation, rhs, functions, book) for name, rhs in (truncation.flow or {}).items()
    }
    flows, couplings = [], []
    for item in truncation.running:
        rhs = lowered[item.name]
        if isinstance(item, RunningFunction):
            atoms = [*lowered.values(), *(loop.integrand for loop in book.loops)]
            jets = jets_in(item.name, len(item.of), atoms)
            flows.append(
                FunctionFlow(name=item.name, coordinates=item.of, rhs=rhs, jets=jets, declared=item)
            )
        elif isinstance(item, RunningCoupling):
            _refuse_functions(truncation, item, rhs)
            couplings.append(CouplingFlow(name=item.name, rhs=rhs))
        else:
            raise NotYet(
                f"a wave-function renormalisation ({item.name}) in a typed-in flow",
                remedy="insert the anomalous dimension into the flow by a definition",
                place=Place(source=truncation.source),
            )
    if len({f.coordinates for f in flows}) > 1:
        raise NotYet(
            "running functions of different coordinates in one typed-in flow",
            remedy="give all functions the same coordinates",
            place=Place(source=truncation.source),
        )
    return FlowEquations(
        truncation=truncation, regulator=book.regulator, functions=tuple(flows), couplings=tuple(couplings),
        potential=None, invariants=None, anomalous=(), odd=None, loops=tuple(book.loops),
        positivity=tuple(_masses(truncation, functions, book)), closed=not book.loops,
    )


def _lower(
    truncation: Truncation, e: sympy.Expr, functions: dict[str, RunningFunction], book: LoopBook
) -> sympy.Expr:
    """Replace definitions, function calls, derivatives and threshold functions, inside out."""
    import sympy

    for name, value in reversed(list(truncation.definitions.items())):
        e = e.subs(sympy.Symbol(name), value)

    def walk(node: sympy.Expr) -> sympy.Expr:
        if isinstance(node, sympy.Derivative):
            return _derivative_jet(truncation, node, functions)
        name = type(node).__name__
        if name in functions:
            _require_plain_call(truncation, node, functions[name])
            return symbols.jet(name, (0,) * len(functions[name].of))
        if name == "l":
            n, w, *rest = (walk(a) for a in node.args)
            if not (n.is_Integer and n >= 0):
                raise InputError(
                    f"the index of a threshold function must be a whole number >= 0, not {n}",
                    remedy="write l(0, w), l(1, w), ...", place=Place(source=truncation.source),
                )
            return book.threshold(int(n), w, rest[0] if rest else sympy.Integer(0))
        if not node.args:
            return node
        return node.func(*(walk(a) for a in node.args))

    return walk(e)


def _derivative_jet(
    truncation: Truncation, node: sympy.Derivative, functions: dict[str, RunningFunction]
) -> sympy.Expr:
    call = node.expr
    name = type(call).__name__
    if name not in functions:
        raise NotYet(
            f"the derivative {node} of something else than a running function",
            remedy="differentiate running functions only, diff(U(rho), rho)",
            place=Place(source=truncation.source),
        )
    _require_plain_call(truncation, call, functions[name])
    orders = dict.fromkeys(functions[name].of, 0)
    for variable, count in node.variable_count:
        orders[variable.name] += int(count)
    return symbols.jet(name, tuple(orders.values()))


def _require_plain_call(truncation: Truncation, call: sympy.Expr, function: RunningFunction) -> None:
    if tuple(str(a) for a in call.args) != function.of:
        raise NotYet(
            f"{call}: a running function at another point than its own coordinates",
            remedy=f"write {function.name}({', '.join(function.of)})",
            place=Place(source=truncation.source),
        )


def _refuse_functions(truncation: Truncation, item: RunningCoupling, rhs: sympy.Expr) -> None:
    if any("{" in s.name and not s.name.startswith("loop{") for s in rhs.free_symbols):
        raise NotYet(
            f"the flow of the coupling {item.name} contains a running function",
            remedy="let the coupling be a coefficient of the function, or give it a closed flow",
            place=Place(source=truncation.source),
        )


def _masses(
    truncation: Truncation, functions: dict[str, RunningFunction], book: LoopBook
) -> list[sympy.Expr]:
    """The second arguments of all threshold functions: the masses in regulated propagators."""
    import sympy

    found: list[sympy.Expr] = []
    for rhs in (truncation.flow or {}).values():
        for call in sorted(rhs.atoms(sympy.Function), key=str):
            if type(call).__name__ != "l":
                continue
            quiet = LoopBook(
                book.regulator, book.dimension, close=False, dimension_value=book.dimension_value
            )
            mass = _lower(truncation, call.args[1], functions, quiet)
            if mass.free_symbols and mass not in found:
                found.append(mass)
    return found
