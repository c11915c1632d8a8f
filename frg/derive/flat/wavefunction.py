"""Anomalous dimension from the momentum dependence of the two-point function (LPA').

With momentum-independent vertices only the diagrams with two three-point vertices depend on the
external momentum p:
   d_t Gamma2(p) = sum_ab Gamma3_ab^2 integral_q d_t R(q) G_a(q)^2 G_b(q + p) + ...,
and the coefficient of p^2 is  integral_q d_t R G_a^2 (G_b' + (2 y/d) G_b''),  primes by y = q^2. Because
y^(d/2-1) (G' + (2y/d) G'') = (2/d) d/dy (y^(d/2) G'), one integration by parts leaves first derivatives of
G_b and at most s'' from d_t R, linearly: the kink of the flat shape is then a surface term in which s' is the
average of its two sides.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.equations import AnomalousDimension
from frg.derive.flat.lagrangian import Potential
from frg.derive.flat.potential import derivative_by_fields, jets_in, radial_field, to_coordinates
from frg.derive.loops import LoopBook
from frg.errors import NotYet
from frg.language.truncation import WaveFunction

if TYPE_CHECKING:
    import sympy


def bubble_slope(
    book: LoopBook, mass_a: sympy.Expr, mass_b: sympy.Expr, eta: sympy.Expr
) -> sympy.Expr:
    """Coefficient of p^2 of  integral dy y^(d/2-1) d_t R G_a(q)^2 G_b(q+p)  as a loop integral."""
    y, P = symbols.momentum(), symbols.inverse_propagator()
    slope = 1 + symbols.shape(1)  # P'
    Ga, Gb = 1 / (P + mass_a), 1 / (P + mass_b)
    insertion, insertion_slope = symbols.regulator_insertion(eta), symbols.regulator_insertion_slope(eta)
    d = book.dimension
    integrand = (2 / d) * y * (insertion_slope * Ga**2 - 2 * insertion * slope * Ga**3) * slope * Gb**2
    return book.integral(integrand, decay=4)


def anomalous_dimension(
    potential: Potential, wave: WaveFunction, book: LoopBook, single: bool
) -> AnomalousDimension:
    """eta = -d_t ln Z read from the Goldstone or the radial mode of the only multiplet; `single` says that it has one
    component in force, so that there is no Goldstone mode."""
    import sympy

    if len(potential.coordinates) != 1 or potential.function is None:
        raise NotYet(
            f"the wave-function renormalisation {wave.name} with several fields or a potential in monomials",
            remedy="drop it (LPA), or use one scalar multiplet with a running function U",
        )
    components = potential.coordinates[0].field.components
    mode = wave.mode
    if mode == "auto":
        mode = "radial" if single else "goldstone"
    eta = symbols.anomalous(wave.name)
    phi = radial_field(0)
    radial = to_coordinates(potential, derivative_by_fields(potential, (0, 0)))
    first = derivative_by_fields(potential, (0,))
    goldstone = to_coordinates(potential, sympy.expand(first / phi))
    # Gamma3 with one radial and two Goldstone legs is d/dphi of the Goldstone mass
    mixed = _square(potential, sympy.expand(_field_derivative(potential, sympy.expand(first / phi))))
    cubic = _square(potential, derivative_by_fields(potential, (0, 0, 0)))
    if mode == "goldstone":
        slope = mixed * (
            bubble_slope(book, radial, goldstone, eta) + bubble_slope(book, goldstone, radial, eta)
        )
    else:
        slope = cubic * bubble_slope(book, radial, radial, eta)
        if components != 1:
            slope += (components - 1) * mixed * bubble_slope(book, goldstone, goldstone, eta)
    rhs = -2 * symbols.volume() * slope
    atoms = [rhs, *(loop.integrand for loop in book.loops)]
    return AnomalousDimension(
        symbol=eta.name, name=wave.name, field=potential.coordinates[0].field.name,
        function=potential.name, rhs=rhs, jets=jets_in(potential.name, 1, atoms), at=wave.at, mode=mode,
    )


def _square(potential: Potential, vertex: sympy.Expr) -> sympy.Expr:
    """The square of a vertex that is odd in the field, in terms of the coordinate, left factored."""
    import sympy

    phi = radial_field(0)
    coordinate = potential.coordinates[0]
    if coordinate.power != 2:
        return to_coordinates(potential, vertex**2)
    reduced = to_coordinates(potential, sympy.expand(vertex / phi))
    return sympy.Symbol(coordinate.name) / coordinate.scale * reduced**2


def _field_derivative(potential: Potential, e: sympy.Expr) -> sympy.Expr:
    """d/dphi of an expression in jets and the field of a single coordinate."""
    import sympy

    phi, c = radial_field(0), potential.coordinates[0]
    slope = sympy.diff(c.scale * phi**c.power, phi)
    total = sympy.diff(e, phi)
    for order in range(7):
        this, following = symbols.jet(potential.name, (order,)), symbols.jet(potential.name, (order + 1,))
        total += sympy.diff(e, this) * following * slope
    return total
