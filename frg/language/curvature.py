"""Is the Lagrangian of a metric a function of the curvature scalar that a flow can be derived from?"""

from __future__ import annotations

from typing import NoReturn

from frg.errors import InputError, Place
from frg.language.truncation import Truncation

CURVATURE = "R"


def check_curvature_action(truncation: Truncation, *, place: Place | None = None) -> None:
    """Raise InputError unless the Lagrangian is a function of R, couplings, parameters and at most one running function of R,
    everything that runs occurs in it, and (without a running function) it is a polynomial in R."""
    import sympy

    lagrangian = truncation.lagrangian
    assert lagrangian is not None
    where = place or Place(source=truncation.source)

    def fail(message: str, remedy: str, text: str | None = None) -> NoReturn:
        raise InputError(message, remedy=remedy, place=Place(where.source, where.line, where.column, text or where.text))

    if truncation.wave_functions:
        name = truncation.wave_functions[0].name
        fail(f"the wave function {name} has no place in an action of the metric", f"make {name} a coupling", name)
    for call in sorted(lagrangian.atoms(sympy.core.function.AppliedUndef), key=str):
        name = type(call).__name__
        if name == "d":
            fail(
                "derivatives of fields have no place in an action of the metric", "count matter in [gravity] matter",
                str(call),
            )
        if name not in {f.name for f in truncation.functions}:
            fail(f"{name} is called in the action and is not in [running]", f"add {name} to [running]", str(call))
        if [str(a) for a in call.args] != [CURVATURE]:
            fail(f"{call} is not a function of {CURVATURE}", f"write {name}({CURVATURE})", str(call))
    if lagrangian.has(sympy.Derivative):
        fail("derivatives of running functions in the action are not supported", "write the function itself", "diff")
    if len(truncation.functions) > 1:
        fail("one running function of R is enough: two add up to one", "keep one of them")
    words = {type(c).__name__ for c in lagrangian.atoms(sympy.core.function.AppliedUndef)}
    words |= {s.name for s in lagrangian.free_symbols}
    if truncation.gravity is not None and truncation.gravity.metric in words:
        name = truncation.gravity.metric
        fail(f"the metric {name} enters through {CURVATURE} only", f"write functions of {CURVATURE}", name)
    for quantity in truncation.running:
        if quantity.name not in words:
            fail(f"{quantity.name} is declared in [running] and never used in the action", f"use {quantity.name} or remove it")
    if truncation.functions:
        (function,) = truncation.functions
        if lagrangian != sympy.Function(function.name)(sympy.Symbol(CURVATURE)):
            fail(
                f"an action with a running function of {CURVATURE} is that function alone",
                f'write lagrangian = "{function.name}({CURVATURE})"; its coefficients are the couplings',
            )
        return
    powers = truncation.expanded(lagrangian).as_poly(sympy.Symbol(CURVATURE))
    if powers is None or len(powers.terms()) < len(truncation.couplings):
        fail(
            f"the action must be a polynomial in {CURVATURE} with as many powers as couplings",
            'write for example "(2*Lambda - R)/(16*pi*G)"',
        )
