"""Is the Lagrangian a scalar with one normalised kinetic term a field, and is everything that runs in it?

Works on the `Truncation`, so that one built by hand from sympy can be checked too (`check_action`).
"""

from __future__ import annotations

import itertools
from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, NoReturn

from frg.errors import InputError, NotYet, Place
from frg.language.algebra import Refused, substitute
from frg.language.truncation import RunningFunction, Truncation

if TYPE_CHECKING:
    import sympy

MOST_DERIVATIVE_TERMS = 400


@dataclass(frozen=True)
class _Term:
    """coefficient * product of d(field, index, ...)^power; the coefficient has no d in it."""

    coefficient: sympy.Expr
    factors: tuple[tuple[sympy.Expr, int], ...]

    def __str__(self) -> str:
        import sympy

        product = sympy.Mul(self.coefficient, *(f**k for f, k in self.factors))
        return str(product).replace("**", "^")


def check_action(truncation: Truncation, *, place: Place | None = None) -> None:
    """Raise InputError unless the Lagrangian is a scalar that this package can derive a flow from.

    Checked: the arguments of running functions, that every running quantity occurs, Lorentz and internal
    indices, and exactly one kinetic term 1/2 d(phi,mu)^2 or Z/2 d(phi,mu)^2 for every field. Raises
    NotYet for higher derivative operators and running functions in front of derivatives."""
    _Check(truncation, place or Place(source=truncation.source)).run()


class _Check:
    def __init__(self, truncation: Truncation, place: Place):
        self.truncation = truncation
        self.place = place

    def fail(self, message: str, remedy: str, *, not_yet: bool = False, text: str | None = None) -> NoReturn:
        place = Place(self.place.source, self.place.line, self.place.column, text[:80] if text else self.place.text)
        raise (NotYet if not_yet else InputError)(message, remedy=remedy, place=place)

    def run(self) -> None:
        lagrangian = self.truncation.lagrangian
        assert lagrangian is not None
        if not self.truncation.fields:
            self.fail("an action needs fields, and [fields] is empty", 'add [fields] with phi = "scalar"')
        self.functions(lagrangian)
        self.used(lagrangian)
        terms, potential = self.split(self.without_calls(lagrangian))
        self.kinetic(terms)
        self.potential(potential)
        for function in self.truncation.functions:
            for name in function.of:
                self.coordinate(function, name)

    # -- running quantities -----------------------------------------------------------------

    def functions(self, lagrangian: sympy.Expr) -> None:
        import sympy

        if lagrangian.has(sympy.Derivative):
            self.fail(
                "derivatives of running functions in the action are not supported yet",
                "write the function itself; its derivatives come out of the derivation",
                not_yet=True,
                text="diff",
            )
        known = {f.name: f for f in self.truncation.functions}
        for call in sorted(lagrangian.atoms(sympy.core.function.AppliedUndef), key=str):
            name = type(call).__name__
            if name == "d":
                continue
            if name not in known:
                self.fail(f"{name} is called in the action and is not in [running]", f"add {name} to [running]")
            of = tuple(str(a) for a in call.args)
            if of != known[name].of:
                wanted = f"{name}({', '.join(known[name].of)})"
                self.fail(f"{call} does not match [running], where {name} is a function of "
                          f"{', '.join(known[name].of)}", f"write {wanted}", text=str(call))  # fmt: skip

    def used(self, lagrangian: sympy.Expr) -> None:
        import sympy

        words = {type(c).__name__ for c in lagrangian.atoms(sympy.core.function.AppliedUndef)}
        words |= {s.name for s in lagrangian.free_symbols}
        for quantity in self.truncation.running:
            if quantity.name not in words:
                self.fail(
                    f"{quantity.name} is declared in [running] and never used in the action",
                    f"use {quantity.name} in the Lagrangian or remove it from [running]",
                )

    def without_calls(self, lagrangian: sympy.Expr) -> sympy.Expr:
        """Definitions put in; running functions as plain symbols; d(...) kept."""
        import sympy

        names = {f.name for f in self.truncation.functions}
        plain = lagrangian.replace(
            lambda e: isinstance(e, sympy.core.function.AppliedUndef) and type(e).__name__ in names,
            lambda e: sympy.Symbol(type(e).__name__),
        )
        for operator in sorted(plain.atoms(sympy.Function("d")), key=str):
            target = str(operator.args[0])
            if target in self.truncation.definitions:
                self.fail(
                    f"{operator}: derivatives of composite expressions are not supported yet",
                    "let d act on a field",
                    not_yet=True,
                    text=str(operator),
                )
        return self.expanded(plain)

    def expanded(self, expression: sympy.Expr) -> sympy.Expr:
        values: dict[str, sympy.Expr] = {}
        try:
            for name, definition in self.truncation.definitions.items():
                values[name] = substitute(definition, values)
            return substitute(expression, values)
        except Refused as refusal:
            self.fail(refusal.message, refusal.remedy)

    # -- derivative terms -------------------------------------------------------------------

    def split(self, lagrangian: sympy.Expr) -> tuple[list[_Term], list[sympy.Expr]]:
        """The terms with derivatives, and the terms without."""
        import sympy

        found = self.terms(lagrangian)
        merged: dict[tuple[tuple[sympy.Expr, int], ...], sympy.Expr] = {}
        for term in found:
            merged[term.factors] = sympy.Add(merged.get(term.factors, sympy.Integer(0)), term.coefficient)
        potential = [c for factors, c in merged.items() if not factors]
        terms = [_Term(c, factors) for factors, c in merged.items() if factors and c != 0]
        return terms, potential

    def terms(self, e: sympy.Expr) -> list[_Term]:
        """Multiply out only what contains d(...); everything else stays one coefficient."""
        import sympy

        operator = sympy.Function("d")
        if not e.has(operator):
            return [_Term(e, ())]
        if e.is_Add:
            return self.limited([t for a in e.args for t in self.terms(a)])
        if isinstance(e, operator):
            return [_Term(sympy.Integer(1), ((e, 1),))]
        if e.is_Mul:
            return self.product([self.terms(a) for a in e.args])
        if e.is_Pow and e.exp.is_Integer and 1 < e.exp <= 8:
            if isinstance(e.base, operator):
                return [_Term(sympy.Integer(1), ((e.base, int(e.exp)),))]
            return self.product([self.terms(e.base)] * int(e.exp))
        self.fail(
            "the Lagrangian is not a polynomial in derivatives of the fields",
            "let d(phi,mu) occur in products and whole powers up to 8 only",
            text=str(e).replace("**", "^"),
        )

    def product(self, factors: list[list[_Term]]) -> list[_Term]:
        import sympy

        found: list[_Term] = []
        total = 1
        for terms in factors:
            total *= len(terms)
            self.limited([], total)
        for combination in itertools.product(*factors):
            powers: Counter[sympy.Expr] = Counter()
            for term in combination:
                for operator, power in term.factors:
                    powers[operator] += power
            ordered = tuple(sorted(powers.items(), key=lambda item: str(item[0])))
            found.append(_Term(sympy.Mul(*(t.coefficient for t in combination)), ordered))
        return found

    def limited(self, terms: list[_Term], count: int = 0) -> list[_Term]:
        if max(len(terms), count) > MOST_DERIVATIVE_TERMS:
            self.fail("the Lagrangian has too many derivative terms", "write it as a sum of simple terms")
        return terms

    def kinetic(self, terms: list[_Term]) -> None:
        normalised: dict[str, _Term] = {}
        for term in terms:
            self.lorentz(term)
            field = self.quadratic(term)
            if field in normalised:
                self.fail(
                    f"the field {field} has two kinetic terms, {normalised[field]} and {term}",
                    f"write one term Z/2*d({field},mu)^2 or d({field},mu)^2/2",
                    text=str(term),
                )
            normalised[field] = term
        for scalar in self.truncation.fields:
            if scalar.name not in normalised:
                self.fail(
                    f"the field {scalar.name} has no kinetic term",
                    f"add d({scalar.name},mu)^2/2 to the Lagrangian",
                )

    def lorentz(self, term: _Term) -> None:
        counts: Counter[str] = Counter()
        for operator, power in term.factors:
            for index in operator.args[1:]:
                counts[str(index)] += power
        for index, count in sorted(counts.items()):
            if count == 1:
                self.fail(
                    f"the Lagrangian is not a scalar: the Lorentz index {index} is free in {term}",
                    "let every Lorentz name occur twice in a term, as in d(phi,mu)^2",
                    text=str(term),
                )
            if count > 2:
                self.fail(
                    f"the Lorentz index {index} occurs {count} times in {term}",
                    "let every Lorentz name occur twice in a term; use mu and nu for separate contractions",
                    text=str(term),
                )

    def quadratic(self, term: _Term) -> str:
        """The field of a normalised kinetic term; everything else is refused."""
        import sympy

        orders = [len(operator.args) - 1 for operator, _ in term.factors]
        if max(orders) > 1 or sum(k for _, k in term.factors) != 2:
            self.fail(
                f"higher derivative operators such as {term} are not supported yet",
                "keep d(phi,mu)^2 only",
                not_yet=True,
                text=str(term),
            )
        fields = [str(operator.args[0]) for operator, _ in term.factors]
        if len(set(fields)) > 1:
            self.fail(
                f"the kinetic term {term} mixes {' and '.join(sorted(fields))}",
                "choose fields with a diagonal kinetic term d(a,mu)^2/2 + d(b,mu)^2/2",
                text=str(term),
            )
        field = fields[0]
        inside = {s.name for s in term.coefficient.free_symbols}
        scalars = {f.name for f in self.truncation.fields}
        if inside & ({f.name for f in self.truncation.functions} | scalars):
            self.fail(
                f"field-dependent factors of derivatives, as in {term}, are not supported yet",
                f"use a number: Z/2*d({field},mu)^2",
                not_yet=True,
                text=str(term),
            )
        allowed = [sympy.Rational(1, 2), *(sympy.Symbol(w.name) / 2 for w in self.truncation.wave_functions)]
        if term.coefficient not in allowed:
            self.fail(
                f"the kinetic term {term} is not canonically normalised",
                f"write d({field},mu)^2/2, or Z/2*d({field},mu)^2 with a wave-function Z",
                text=str(term),
            )
        return field

    # -- the potential ----------------------------------------------------------------------

    def potential(self, terms: list[sympy.Expr]) -> None:
        waves = {w.name for w in self.truncation.wave_functions}
        for term in terms:
            for name in sorted(waves & {s.name for s in term.free_symbols}):
                self.fail(
                    f"the wave function {name} stands outside the kinetic term",
                    f"remove it there: couplings are those of renormalised fields, {name} drops out",
                    text=str(name),
                )
            self.even(term, "the Lagrangian")

    def even(self, e: sympy.Expr, where: str) -> None:
        """Refuse a field with several components outside whole powers of its square."""
        several = {f.name for f in self.truncation.fields if f.components != 1}
        lonely = _outside_squares(e, several)
        if lonely:
            self.fail(
                f"{where} is not a scalar: the components of {lonely} are not contracted",
                f"use {lonely} in even powers only: {lonely}^2 is the sum over its components",
                text=lonely,
            )

    def coordinate(self, function: RunningFunction, name: str) -> None:
        definitions: Mapping[str, sympy.Expr] = self.truncation.definitions
        if name not in definitions:
            self.fail(f"{function.name} is a function of {name}, which is not in [definitions]", f"define {name}")
        value = self.expanded(definitions[name])
        if not {s.name for s in value.free_symbols} & {f.name for f in self.truncation.fields}:
            self.fail(
                f"{function.name} is a function of {name}, which does not depend on any field",
                f'define {name} in the fields, for example {name} = "{self.truncation.fields[0].name}^2/2"',
                text=name,
            )
        self.even(value, f"the coordinate {name} of {function.name}")


def _outside_squares(e: sympy.Expr, names: set[str]) -> str | None:
    """The first of the names that occurs otherwise than in an even positive power."""
    if e.is_Symbol:
        return e.name if e.name in names else None
    if e.is_Pow and e.base.is_Symbol and e.exp.is_Integer and e.exp > 0 and e.exp % 2 == 0:
        return None
    for argument in e.args:
        found = _outside_squares(argument, names)
        if found:
            return found
    return None
