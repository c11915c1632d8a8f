"""First passes over a flat-space Lagrangian: kinetic part, potential, working coordinates."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from frg.errors import FrgError, NotYet
from frg.language.truncation import (
    RunningCoupling,
    RunningFunction,
    ScalarField,
    Truncation,
    WaveFunction,
)

if TYPE_CHECKING:
    import sympy


@dataclass(frozen=True, kw_only=True)
class Coordinate:
    """A working coordinate of the potential: `scale` * field^`power` along the radial direction of
    one multiplet. `power` is its scaling degree in the fields."""

    name: str
    field: ScalarField
    power: int
    scale: sympy.Expr


@dataclass(frozen=True, kw_only=True)
class Potential:
    """The potential as a function called `name` of the working coordinates.

    Exactly one of three descriptions: `function` alone (the coordinates are its arguments);
    `terms` (monomials with couplings); `function` and `invariants` (its arguments as polynomials in the
    coordinates, which are then the fields themselves)."""

    name: str
    coordinates: tuple[Coordinate, ...]
    function: RunningFunction | None
    invariants: tuple[sympy.Expr, ...]
    couplings: tuple[str, ...]
    terms: dict[tuple[int, ...], sympy.Expr]


def split_kinetic(truncation: Truncation) -> tuple[sympy.Expr, sympy.Expr]:
    """(terms with derivatives of fields, the rest), definitions not yet inserted."""
    import sympy

    lagrangian = truncation.lagrangian
    if lagrangian is None:
        raise FrgError("this truncation has a typed-in flow and no Lagrangian")
    kinetic: list[sympy.Expr] = []
    potential: list[sympy.Expr] = []
    for term in sympy.Add.make_args(sympy.expand(lagrangian)):
        derivative = any(type(f).__name__ == "d" for f in term.atoms(sympy.Function))
        (kinetic if derivative else potential).append(term)
    return sympy.Add(*kinetic), sympy.Add(*potential)


def wave_function_of(truncation: Truncation, kinetic: sympy.Expr) -> dict[str, WaveFunction]:
    """Field name -> wave-function renormalisation multiplying its kinetic term."""
    import sympy

    named = {z.name: z for z in truncation.running if isinstance(z, WaveFunction)}
    found: dict[str, WaveFunction] = {}
    for term in sympy.Add.make_args(kinetic):
        fields = {
            str(f.args[0]) for f in term.atoms(sympy.Function) if type(f).__name__ == "d"
        }
        for symbol in term.free_symbols:
            if symbol.name in named and len(fields) == 1:
                found[fields.pop()] = named[symbol.name]
    return found


def read_potential(truncation: Truncation, potential: sympy.Expr) -> Potential:
    """Decide the working coordinates and the form of the potential."""
    import sympy

    functions = [f for f in truncation.running if isinstance(f, RunningFunction)]
    calls = [a for a in potential.atoms(sympy.Function) if type(a).__name__ in {f.name for f in functions}]
    if not calls:
        return _monomials(truncation, potential)
    if len(functions) != 1 or len(calls) != 1 or sympy.expand(potential - calls[0]) != 0:
        raise NotYet(
            "a potential that mixes a running function with other terms or functions",
            remedy="write the potential as one running function of one or more invariants, or as "
            "monomials with couplings",
        )
    function = functions[0]
    invariants = tuple(_insert_definitions(truncation, sympy.Symbol(name)) for name in function.of)
    coordinates = _radial_coordinates(truncation, function, invariants)
    if coordinates is not None:
        return Potential(
            name=function.name, coordinates=coordinates, function=function,
            invariants=(), couplings=(), terms={},
        )
    coordinates, in_fields = _field_coordinates(truncation, list(invariants))
    return Potential(
        name=function.name, coordinates=coordinates, function=function,
        invariants=tuple(in_fields), couplings=(), terms={},
    )


def _insert_definitions(truncation: Truncation, e: sympy.Expr) -> sympy.Expr:
    import sympy

    for name, value in reversed(list(truncation.definitions.items())):
        e = e.subs(sympy.Symbol(name), value)
    return sympy.expand(e)


def _radial_coordinates(
    truncation: Truncation, function: RunningFunction, invariants: tuple[sympy.Expr, ...]
) -> tuple[Coordinate, ...] | None:
    """Coordinates when each invariant is a multiple of the square of one multiplet, each multiplet
    once; None otherwise."""
    import sympy

    fields = {f.name: f for f in truncation.fields}
    found = []
    for name, value in zip(function.of, invariants, strict=True):
        used = [s for s in value.free_symbols if s.name in fields]
        if len(used) != 1:
            return None
        scale = value / used[0] ** 2
        if scale.has(used[0]) or not (scale.is_number or scale.free_symbols):
            return None
        found.append(
            Coordinate(name=name, field=fields[used[0].name], power=2, scale=sympy.simplify(scale))
        )
    if sorted(c.field.name for c in found) != sorted(fields):
        return None
    return tuple(found)


def _field_coordinates(
    truncation: Truncation, expressions: list[sympy.Expr]
) -> tuple[tuple[Coordinate, ...], list[sympy.Expr]]:
    """A multiplet phi enters through phi^2/2, because its Goldstone modes need (1/phi) dV/dphi to be a
    polynomial; so does a single field that occurs in even powers only (far fewer monomials). Other single
    fields are their own coordinates."""
    import sympy

    coordinates, rewritten = [], list(expressions)
    for field in truncation.fields:
        phi = sympy.Symbol(field.name)
        odd = any(p % 2 for e in rewritten for (p,) in sympy.Poly(e, phi).monoms())
        if field.components == 1 and odd:
            coordinates.append(Coordinate(name=field.name, field=field, power=1, scale=sympy.Integer(1)))
            continue
        name = f"{field.name}{HALF_SQUARE}"
        half = sympy.Rational(1, 2)
        coordinates.append(Coordinate(name=name, field=field, power=2, scale=half))
        square = sympy.Symbol(name)
        rewritten = [sympy.expand(_even(e, phi, 2 * square)) for e in rewritten]
    return tuple(coordinates), rewritten


HALF_SQUARE = "{^2/2}"  # ending of the name of the coordinate phi^2/2 of a field phi


def _even(e: sympy.Expr, phi: sympy.Symbol, square: sympy.Expr) -> sympy.Expr:
    """Replace phi^(2k) by square^k in a polynomial that is even in phi."""
    import sympy

    polynomial = sympy.Poly(e, phi)
    if any(power % 2 for (power,), _ in polynomial.terms()):
        raise FrgError(f"odd powers of the multiplet {phi} survive in {e}")
    return sympy.Add(*(c * square ** (power // 2) for (power,), c in polynomial.terms()))


def _monomials(truncation: Truncation, potential: sympy.Expr) -> Potential:
    import sympy

    names = tuple(c.name for c in truncation.running if isinstance(c, RunningCoupling))
    expanded = _insert_definitions(truncation, potential)
    coordinates, (expanded,) = _field_coordinates(truncation, [expanded])
    symbols = [sympy.Symbol(c.name) for c in coordinates]
    if not expanded.is_polynomial(*symbols):
        raise NotYet(
            f"a potential that is not a polynomial in the fields: {potential}",
            remedy="use a running function U for a general potential",
        )
    polynomial = sympy.Poly(expanded, *symbols)
    couplings = {sympy.Symbol(n) for n in names}
    for powers, coefficient in polynomial.terms():
        if not coefficient.free_symbols & couplings:
            raise NotYet(
                f"the term {sympy.Mul(coefficient, *(s**p for s, p in zip(symbols, powers, strict=True)))} "
                "of the potential carries no running coupling",
                remedy="multiply every term by a coupling declared in [running]: every operator flows",
            )
    return Potential(
        name="V{}", coordinates=coordinates, function=None, invariants=(), couplings=names,
        terms={powers: c for powers, c in polynomial.terms() if any(powers)},
    )
