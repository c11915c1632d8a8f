"""Is the Lagrangian of a metric a function of the curvature scalar that a flow can be derived from?"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, NoReturn

from frg.errors import InputError, Place
from frg.language.algebra import GIVING_UP
from frg.language.truncation import Truncation
from frg.language.wording import expression_text

if TYPE_CHECKING:
    import sympy

CURVATURE = "R"
HIGHEST_POWER = 100  # of R in an action with couplings
MOST_TERMS = 300  # of an action with couplings, multiplied out over one denominator
TOO_MANY = 1e9


def check_curvature_action(truncation: Truncation, *, place: Place | None = None) -> None:
    """Raise InputError unless the Lagrangian is a function of R, couplings, parameters and at most one running function
    of R, everything that runs occurs in it, and (without a running function) it is a polynomial in R."""
    _Check(truncation, place or Place(source=truncation.source)).run()


class _Check:
    def __init__(self, truncation: Truncation, place: Place):
        self.truncation = truncation
        self.place = place

    def fail(self, message: str, remedy: str, text: str | None = None) -> NoReturn:
        place = Place(self.place.source, self.place.line, self.place.column, text[:80] if text else self.place.text)
        raise InputError(message, remedy=remedy, place=place)

    def run(self) -> None:
        import sympy

        lagrangian = self.truncation.lagrangian
        assert lagrangian is not None
        self.calls(lagrangian)
        try:
            expanded = self.truncation.expanded(lagrangian)
        except InputError as error:
            raise error.at(self.place) from None
        self.names(lagrangian, expanded)
        if not self.truncation.functions:
            self.polynomial(expanded)
            return
        name = self.truncation.functions[0].name
        if lagrangian != sympy.Function(name)(sympy.Symbol(CURVATURE)):
            self.fail(
                f"an action with a running function of {CURVATURE} is that function alone",
                f'write lagrangian = "{name}({CURVATURE})"; its coefficients are the couplings',
            )

    def calls(self, lagrangian: sympy.Expr) -> None:
        """Running functions of R as they are, and no derivatives."""
        import sympy

        if self.truncation.wave_functions:
            name = self.truncation.wave_functions[0].name
            self.fail(f"the wave function {name} has no place in an action of the metric", f"make {name} a coupling", name)
        for call in sorted(lagrangian.atoms(sympy.core.function.AppliedUndef), key=str):
            name, text = type(call).__name__, expression_text(call)
            if name == "d":
                self.fail(
                    "derivatives of fields have no place in an action of the metric",
                    "remove them, and count matter in [gravity] matter",
                    text,
                )
            if name not in {f.name for f in self.truncation.functions}:
                self.fail(f"{name} is called in the action and is not in [running]", f"add {name} to [running]", text)
            if call.args != (sympy.Symbol(CURVATURE),):
                self.fail(f"{text} is not a function of {CURVATURE} alone", f"write {name}({CURVATURE})", text)
        if lagrangian.has(sympy.Derivative):
            self.fail("derivatives of running functions in the action are not supported", "write the function itself", "diff")
        if len(self.truncation.functions) > 1:
            first, second = self.truncation.functions[:2]
            self.fail(
                f"{first.name} and {second.name} are both functions of {CURVATURE}, and only their sum could enter",
                "keep one of them",
            )

    def names(self, lagrangian: sympy.Expr, expanded: sympy.Expr) -> None:
        """The metric does not occur; what runs does."""
        import sympy

        words = {type(c).__name__ for c in lagrangian.atoms(sympy.core.function.AppliedUndef)}
        words |= {s.name for s in lagrangian.free_symbols}
        gravity = self.truncation.gravity
        if gravity is not None and gravity.metric in words | {s.name for s in expanded.free_symbols}:
            name = gravity.metric
            self.fail(f"the metric {name} enters through {CURVATURE} only", f"write functions of {CURVATURE}", name)
        for quantity in self.truncation.running:
            if quantity.name not in words:
                self.fail(
                    f"{quantity.name} is declared in [running] and never used in the action",
                    f"use {quantity.name} in the Lagrangian or remove it from [running]",
                )

    def polynomial(self, expanded: sympy.Expr) -> None:
        import sympy

        remedy = 'write for example "(2*Lambda - R)/(16*pi*G)"'
        powers = None
        if not sum(_terms(expanded)) <= MOST_TERMS:  # so that an undefined count, inf/inf, is refused too
            self.fail("the action has too many terms when multiplied out", f"keep fewer than {MOST_TERMS}: {remedy}")
        try:
            powers = expanded.as_poly(sympy.Symbol(CURVATURE))
        except GIVING_UP:
            pass
        if powers is None:
            self.fail(f"the action is not a polynomial in {CURVATURE}", f"use whole powers of {CURVATURE}: {remedy}")
        if powers.degree() > HIGHEST_POWER:
            self.fail(f"the action has the power {powers.degree()} of {CURVATURE}", f"keep powers up to {HIGHEST_POWER}")
        couplings, terms = len(self.truncation.couplings), len(powers.terms())
        if terms < couplings:
            self.fail(
                f"the action has {couplings} couplings and only {terms} power{'s' if terms > 1 else ''} of {CURVATURE}, "
                "so that their flows cannot be told apart",
                f"give every coupling a power of {CURVATURE} of its own: {remedy}",
            )


def _terms(e: sympy.Expr) -> tuple[float, float]:
    """At most how many terms the numerator and the denominator have when multiplied out, without doing it."""
    parts = [_terms(a) for a in e.args]
    if e.is_Add:
        below = math.prod(m for _, m in parts)
        return sum(n * below / m for n, m in parts), below
    if e.is_Mul:
        return math.prod(n for n, _ in parts), math.prod(m for _, m in parts)
    if e.is_Pow and e.exp.is_Rational:
        power = math.ceil(abs(e.exp))
        above, below = (_power_terms(n, power) for n in parts[0])
        return (above, below) if e.exp > 0 else (below, above)
    return sum((n * m for n, m in parts), start=1.0) if parts else 1.0, 1.0


def _power_terms(terms: float, power: int) -> float:
    """Monomials of degree `power` in that many terms; no more than a bound, which keeps large counts finite."""
    return float(min(math.comb(power + math.ceil(terms) - 1, power), TOO_MANY)) if terms <= MOST_TERMS else TOO_MANY
