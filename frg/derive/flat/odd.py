"""Perturbations odd in the field of one real scalar: V -> U(rho) + epsilon phi h(rho), first order in epsilon.

The eigenvalue of h = 1 is exactly (d + 2 - eta)/2, and (d - 2 + eta)/2 belongs to the redundant shift
of the field, h = U'; both are checks of the numerics. At first order an odd perturbation cannot change
eta once the two-point function is symmetrised under phi -> -phi.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.equations import OddSector
from frg.derive.flat.lagrangian import Potential
from frg.derive.flat.potential import derivative_by_fields, jets_in, radial_field, to_coordinates
from frg.derive.loops import LoopBook

if TYPE_CHECKING:
    import sympy

ODD = "h{}"


def odd_sector(potential: Potential, book: LoopBook, eta: sympy.Expr) -> OddSector | None:
    """d_t h for a single real scalar with a potential U(rho); None where there is no such sector."""
    import sympy

    if len(potential.coordinates) != 1 or potential.function is None or potential.invariants:
        return None
    coordinate = potential.coordinates[0]
    if coordinate.field.components != 1 or coordinate.power != 2:
        return None
    phi, d = radial_field(0), book.dimension
    h = [symbols.jet(ODD, (k,)) for k in range(3)]
    slope = sympy.diff(coordinate.scale * phi**2, phi)
    curvature = sympy.diff(slope, phi)
    # (phi h)' and (phi h)'' divided by phi; slope * phi = 2 x
    x = sympy.Symbol(coordinate.name)
    first = h[0] + 2 * x * h[1]
    second = sympy.expand(2 * slope / phi * h[1] + curvature * h[1] + slope**2 * h[2])
    second = to_coordinates(potential, second)
    w = to_coordinates(potential, derivative_by_fields(potential, (0, 0)))
    if book.regulator.closed_form:
        response = -2 / (1 + w)
    elif book.closed_mass and eta == 0:
        response = -2 * book.threshold(1, w, eta)
    else:
        P = symbols.inverse_propagator()
        response = -book.integral(symbols.regulator_insertion(eta) / (P + w) ** 2, decay=2)
    rhs = -d * h[0] + (d - 2 + eta) / 2 * first + symbols.volume() * response * second
    atoms = [rhs, *(loop.integrand for loop in book.loops)]
    return OddSector(
        name=ODD, function=potential.name, rhs=rhs, jets=jets_in(ODD, 1, [rhs]),
        background_jets=jets_in(potential.name, 1, atoms),
    )
