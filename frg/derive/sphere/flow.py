"""The flow of F(R) on the sphere: d_t F = (4 pi)^(-d/2) sum over mode families of heat-kernel sums of Q-functionals.

M. Reuter, Phys. Rev. D 57 (1998) 971, hep-th/9605030; A. Codello, R. Percacci, C. Rahmede, Int. J. Mod. Phys. A 23
(2008) 143, arXiv:0705.1769; P. Machado, F. Saueressig, Phys. Rev. D 77 (2008) 124045, arXiv:0712.0445.
"""

from __future__ import annotations

import dataclasses
from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.equations import CouplingFlow, FlowEquations, FunctionFlow
from frg.derive.flat.potential import jets_in
from frg.derive.loops import LoopBook
from frg.derive.sphere.action import AbstractAction, CouplingAction, FunctionAction, action_of
from frg.derive.sphere.cutoff import Regulated, matter_traces, regulated
from frg.derive.sphere.functionals import Functionals
from frg.derive.sphere.heat import heat_sum
from frg.derive.sphere.hessian import Geometry, Trace, curvature, feynman_traces, landau_traces, whole_fields
from frg.derive.sphere.taylor import taylor_traces
from frg.errors import NotYet, Place
from frg.language.gravity import Gravity
from frg.language.truncation import Truncation

if TYPE_CHECKING:
    import sympy


def sphere_flow(truncation: Truncation, book: LoopBook) -> FlowEquations:
    """The flow of a truncation of gravity. Raises NotYet for gauges, cutoffs and shapes that do not go together."""
    gravity = truncation.gravity
    assert gravity is not None
    # heat-kernel coefficients are those of one dimension: it enters by its value
    truncation = dataclasses.replace(truncation, dimension=truncation.value(truncation.dimension))
    book.dimension = truncation.dimension
    gravity = dataclasses.replace(
        gravity, endomorphism={k: truncation.value(v) for k, v in gravity.endomorphism.items()}
    )
    action = action_of(truncation)
    try:
        traces = [regulated(t, action, gravity) for t in _traces(truncation, action, gravity)]
        functionals = Functionals(book=book, dimension=truncation.dimension)
        if isinstance(action, FunctionAction):
            return _function_flow(truncation, book, action, traces, functionals)
        assert isinstance(action, CouplingAction)
        return _coupling_flow(truncation, book, action, traces, functionals)
    except NotYet as error:
        raise error.at(Place(source=truncation.source)) from None


def _traces(truncation: Truncation, action: AbstractAction, gravity: Gravity) -> list[Trace]:
    import sympy

    d = truncation.dimension
    geometry = Geometry(d=d, jets=(action.jet(0), action.jet(1), action.jet(2)))
    exponential = gravity.parametrisation == "exponential"
    alpha, beta = gravity.gauge.alpha, gravity.gauge.beta
    if beta is None:
        beta = d / 2 - 1
    if truncation.value(alpha) == 0:
        traces = landau_traces(geometry, beta, exponential=exponential)
        if gravity.cutoff != "Ib":
            raise NotYet(
                f"cutoff type {gravity.cutoff} in a gauge with alpha = 0",
                remedy='use cutoff = "Ib" (York components), or gauge = "harmonic" with an action linear in R',
            )
        _refuse_low_modes(truncation, action, traces)
    else:
        traces = feynman_traces(geometry, alpha, beta, exponential=exponential)
        if gravity.cutoff != "Ib":
            traces = whole_fields(traces, geometry)
    return _factored([t for t in [*traces, *matter_traces(gravity, d)] if sympy.simplify(t.operator) != 0], action)


def _refuse_low_modes(truncation: Truncation, action: AbstractAction, traces: list[Trace]) -> None:
    """For beta != 0 the lowest scalar modes need a treatment of their own, which enters from R^(d/2) on."""
    if not any(t.name == "gauge condition" for t in traces):
        return
    if isinstance(action, CouplingAction) and max(action.powers) < truncation.numeric(truncation.dimension) / 2:
        return
    raise NotYet(
        "a gauge with beta != 0 for powers of R from d/2 on: the lowest scalar modes need their own treatment",
        remedy="use gauge = { alpha = 0, beta = 0 }",
    )


def _factored(traces: list[Trace], action: AbstractAction) -> list[Trace]:
    """Factors of an operator that do not run are traces of their own; equal operators on equal bundles are added up, so that
    what gauge fixing brings in twice with opposite signs drops out."""
    import sympy

    from frg.derive.sphere.hessian import delta

    collected: dict[tuple[str, object, sympy.Expr], Trace] = {}
    for trace in traces:
        _, factors = sympy.factor_list(trace.operator, delta(), curvature())
        parts = [(f, sympy.Integer(k)) for f, k in factors if f.has(delta()) and not _runs(f, action)]
        rest = sympy.cancel(trace.operator / sympy.Mul(*(f**k for f, k in parts)))
        if _runs(rest, action) and not rest.has(delta()):
            parts = [(trace.operator, sympy.Integer(1))]  # a running factor is part of R_k
        elif rest.has(delta()):
            parts.append((rest, sympy.Integer(1)))
        for operator, power in parts:
            key = (trace.bundle.kind, trace.bundle.excluded, sympy.factor(operator))
            old = collected.get(key)
            sign = power * trace.sign + (old.sign if old else 0)
            name = old.name if old else trace.name
            collected[key] = Trace(name=name, sign=sign, bundle=trace.bundle, operator=operator)
    return [t for t in collected.values() if t.sign != 0]


def _runs(expression: sympy.Expr, action: AbstractAction) -> bool:
    if isinstance(action, FunctionAction):
        return any(s.name.startswith(f"{action.name}{{") for s in expression.free_symbols)
    return bool({s.name for s in expression.free_symbols} & {c.name for c in action.truncation.couplings})


# ---- one running function -----------------------------------------------------------------------

LONGEST = 40  # powers of R kept in sums over n that do not end (odd dimensions)


def _function_flow(
    truncation: Truncation, book: LoopBook, action: FunctionAction, traces: list[Regulated], functionals: Functionals
) -> FlowEquations:
    """d_t f as a local expression that vanishes: linear in the t-derivatives of f, f', f''; multiplied through by the
    denominators that contain f, whose zeros are not poles of the flow (the numerators vanish there too)."""
    import sympy

    (function,) = truncation.functions
    if function.grid is not None or truncation.value(function.about) != 0:  # type: ignore[arg-type]
        raise NotYet(f"{function.name} expanded otherwise than about R = 0", remedy='write about = 0, order = "n"')
    left = -action.rate(action.jet(0))
    prefactor = 1 / (4 * sympy.pi) ** (truncation.dimension / 2)
    highest: int | None = None
    under: tuple[tuple[sympy.Expr, sympy.Expr], ...] = ()
    if functionals.closed:
        quotients, highest = _closed_quotients(truncation, traces, functionals)
        running = [(n, q) for n, q in quotients if _runs(q, action)]
        constant = [(n, q) for n, q in quotients if not _runs(q, action)]
        product = sympy.Mul(*(q for _, q in running))
        balance = (left + prefactor * sympy.Add(*(n / q for n, q in constant))) * product
        for n, q in running:
            others = sympy.Mul(*(p for _, p in running if p is not q))
            balance += prefactor * n * others
    else:
        value, highest = taylor_traces(truncation, traces, functionals)
        under = tuple((t.numerator, t.denominator) for t in traces)
        balance = left + prefactor * value
    expressions = [balance, *(loop.integrand for loop in book.loops)]
    flow = FunctionFlow(
        name=function.name, coordinates=function.of, rhs=balance, jets=jets_in(function.name, 1, expressions),
        declared=function, rates=jets_in(symbols.RATE + function.name, 1, expressions),
    )
    return FlowEquations(
        truncation=truncation, regulator=book.regulator, functions=(flow,), couplings=(), potential=None,
        invariants=None, anomalous=(), odd=None, loops=tuple(book.loops), positivity=_positivity(traces, action),
        closed=not book.loops, highest_order=highest, quotients=under,
        signs=((-action.jet(1), "Newton's coupling -1/(16 pi f') is negative"),),
    )


def _closed_quotients(
    truncation: Truncation, traces: list[Regulated], functionals: Functionals
) -> tuple[list[tuple[sympy.Expr, sympy.Expr]], int | None]:
    """(numerator, denominator) of every trace, and the highest order for which they are complete (None: all)."""
    import sympy

    d = truncation.value(truncation.dimension)
    even = d.is_Integer and d % 2 == 0
    found = []
    for trace in traces:
        powers = functionals.powers(trace.numerator)
        upto = int(d) // 2 + len(powers) - 1 if even else LONGEST
        c = heat_sum(truncation, trace, upto)
        total = sympy.Add(*(
            c[n] * curvature() ** n * nu * functionals.flat(n, j, trace.offset)
            for n in range(upto + 1) for j, nu in enumerate(powers)
        ))
        found.append((trace.sign * sympy.expand(total), functionals.denominator(trace.denominator)))
    return found, None if even else LONGEST


def _positivity(traces: list[Regulated], action: AbstractAction) -> tuple[sympy.Expr, ...]:
    """w of the propagators 1/(P + w) of modes with a second-order operator that runs."""
    import sympy

    P, found = sympy.Symbol("P{}"), []
    for trace in traces:
        denominator = trace.denominator.subs(symbols.shape(0), P - symbols.momentum())
        poly = sympy.Poly(sympy.expand(denominator), P)
        if _runs(denominator, action) and poly.degree() == 1:
            w = sympy.simplify(poly.coeff_monomial(1) / poly.coeff_monomial(P))
            if w not in found:
                found.append(w)
    return tuple(found)


# ---- couplings ------------------------------------------------------------------------------------


def _coupling_flow(
    truncation: Truncation, book: LoopBook, action: CouplingAction, traces: list[Regulated], functionals: Functionals
) -> FlowEquations:
    """Projection on the powers of R that the action has; the equations are linear in the t-derivatives of the
    couplings and are solved for them."""
    import sympy

    R = curvature()
    prefactor = 1 / (4 * sympy.pi) ** (truncation.dimension / 2)
    left = sympy.expand(action.rate(action.jet(0)))
    rows = []
    for power in action.powers:
        right = sympy.Add(*(_coefficient(truncation, t, power, functionals) for t in traces))
        rows.append(left.coeff(R, power) - prefactor * right)
    rates = [symbols.rate(c.name) for c in truncation.couplings]
    names = {sympy.Symbol(c.name) for c in truncation.couplings}
    solution = _solved(rows, rates, names, grouped=bool(book.loops))
    flows = tuple(
        CouplingFlow(name=c.name, rhs=value) for c, value in zip(truncation.couplings, solution, strict=True)
    )
    positivity = tuple(dict.fromkeys(w.subs(R, 0) for w in _positivity(traces, action)))
    return FlowEquations(
        truncation=truncation, regulator=book.regulator, functions=(), couplings=flows, potential=None,
        invariants=None, anomalous=(), odd=None, loops=tuple(book.loops),
        positivity=tuple(w for w in positivity if w.free_symbols), closed=not book.loops,
        signs=_newton_sign(action),
    )


def _newton_sign(action: CouplingAction) -> tuple[tuple[sympy.Expr, str], ...]:
    if 1 not in action.powers:
        return ()
    return ((-action.jet(1).subs(curvature(), 0), "Newton's coupling is negative: R enters with the wrong sign"),)


def _coefficient(
    truncation: Truncation, trace: Regulated, power: int, functionals: Functionals
) -> sympy.Expr:
    """The coefficient of R^power of sign * sum_n c_n R^n Q_(d/2-n)[numerator/denominator]."""
    import sympy

    R = curvature()
    c = heat_sum(truncation, trace, power)
    total = sympy.Integer(0)
    if functionals.closed:
        denominator = functionals.denominator(trace.denominator)
        for j, nu in enumerate(functionals.powers(trace.numerator)):
            for n in range(power + 1):
                total += c[n] * functionals.flat(n, j, trace.offset) * _taylor(nu / denominator, R, power - n)
        return trace.sign * total
    if trace.offset != 0:
        raise NotYet("cutoff type III for a shape other than flat", remedy='use shape = "flat", or another cutoff type')
    for n in range(power + 1):
        numerator, denominator, decay = _taylor_quotient(trace.numerator, trace.denominator, power - n)
        total += c[n] * functionals.open(n, numerator, denominator, decay=decay)
    return trace.sign * total


def _taylor(expression: sympy.Expr, R: sympy.Symbol, order: int) -> sympy.Expr:
    import sympy

    return expression.diff(R, order).subs(R, 0) / sympy.factorial(order) if order else expression.subs(R, 0)


def _taylor_quotient(
    numerator: sympy.Expr, denominator: sympy.Expr, order: int
) -> tuple[sympy.Expr, sympy.Expr, int]:
    """The coefficient of R^order of a quotient, as a quotient with a power of the denominator at R = 0."""
    import sympy

    R = curvature()
    ours = [_taylor(numerator, R, k) for k in range(order + 1)]
    theirs = [_taylor(denominator, R, k) for k in range(order + 1)]
    # w_k = (n_k - sum_(i>0) d_i w_(k-i))/d_0, written over d_0^(k+1)
    found: list[sympy.Expr] = []
    for k in range(order + 1):
        rest = ours[k] * theirs[0] ** k
        for i in range(1, k + 1):
            rest -= theirs[i] * found[k - i] * theirs[0] ** (i - 1)
        found.append(sympy.expand(rest) if k else rest)
    return found[order], theirs[0] ** (order + 1), order + 1


def _solved(
    rows: list[sympy.Expr], rates: list[sympy.Symbol], couplings: set[sympy.Symbol], *, grouped: bool
) -> list[sympy.Expr]:
    """Linear equations solved for the rates, common factors of the couplings cancelled, so that the flow is regular where
    they vanish."""
    import sympy

    back: dict[sympy.Symbol, sympy.Expr] = {}

    def plain(e: sympy.Expr) -> sympy.Expr:
        """Irrational numbers, and sums of loops that multiply the same couplings, as letters: polynomial algebra over
        all of them would be slow."""
        if e.is_Rational or (e.is_Symbol and e in couplings):
            return e
        if e.is_number and (e.is_Add or e.is_Mul or (e.is_Pow and e.exp.is_Integer)):
            return e.func(*(plain(a) for a in e.args))
        if not e.free_symbols & couplings:
            return next((k for k, v in back.items() if v == e), None) or _letter(back, e)
        if e.is_Add and grouped:
            alone, rest = e.as_independent(*couplings, as_Add=True)
            by_couplings: dict[sympy.Expr, sympy.Expr] = {}
            for term in sympy.Add.make_args(rest):
                factor, power = term.as_independent(*couplings, as_Add=False)
                by_couplings[power] = by_couplings.get(power, 0) + factor
            return plain(alone) + sympy.Add(*(plain(f) * plain(p) for p, f in by_couplings.items()))
        if e.is_Mul and grouped:
            factor, power = e.as_independent(*couplings, as_Add=False)
            return plain(factor) * sympy.Mul(*(plain(a) for a in sympy.Mul.make_args(power)))
        return e.func(*(plain(a) for a in e.args))

    if grouped:  # all denominators that contain couplings are inside the loops
        rows = [sympy.expand(row) for row in rows]
    matrix, right = sympy.linear_eq_to_matrix(rows, rates)
    solution = matrix.applyfunc(plain).LUsolve(right.applyfunc(plain))
    return [sympy.factor(sympy.cancel(sympy.together(e))).xreplace(back) for e in solution]


def _letter(known: dict[sympy.Symbol, sympy.Expr], value: sympy.Expr) -> sympy.Symbol:
    import sympy

    letter = sympy.Dummy()
    known[letter] = value
    return letter
