"""Flow of the potential on a constant background: d_t V = (1/2) Tr [d_t R_k / (Gamma'' + R_k)].

C. Wetterich, Phys. Lett. B 301 (1993) 90. The trace over field components is taken in the
directions of a radial background: one radial mode for each multiplet (these mix) and
components - 1 Goldstone modes with the mass (1/phi) dV/dphi.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product
from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.flat.lagrangian import Coordinate, Potential

if TYPE_CHECKING:
    import sympy


@dataclass(frozen=True, kw_only=True)
class ModeBlocks:
    """Mass matrices of the fluctuations in terms of jets and coordinates.

    `radial` lists blocks of mixing radial modes; `goldstone` pairs of (multiplicity, mass)."""

    radial: tuple[sympy.Matrix, ...]
    goldstone: tuple[tuple[sympy.Expr, sympy.Expr], ...]


def jet_of(potential: Potential, orders: tuple[int, ...]) -> sympy.Symbol:
    return symbols.jet(potential.name, orders)


def derivative_by_fields(potential: Potential, by: tuple[int, ...]) -> sympy.Expr:
    """d V / d(phi_i ...) with the fields numbered as the coordinates, in jets and in the field symbols
    `radial_field(i)`: the chain rule through the coordinates scale * phi^power."""
    import sympy

    count = len(potential.coordinates)
    fields = [radial_field(i) for i in range(count)]
    values = [c.scale * f**c.power for c, f in zip(potential.coordinates, fields, strict=True)]
    terms: dict[tuple[int, ...], sympy.Expr] = {(0,) * count: sympy.Integer(1)}
    for index in by:
        slope = sympy.diff(values[index], fields[index])
        new: dict[tuple[int, ...], sympy.Expr] = {}
        for orders, factor in terms.items():
            raised = tuple(k + (j == index) for j, k in enumerate(orders))
            new[raised] = new.get(raised, 0) + factor * slope
            new[orders] = new.get(orders, 0) + sympy.diff(factor, fields[index])
        terms = {o: f for o, f in new.items() if f != 0}
    return sympy.expand(sympy.Add(*(f * jet_of(potential, o) for o, f in terms.items())))


def radial_field(index: int) -> sympy.Symbol:
    import sympy

    return sympy.Symbol(f"phi{{{index}}}", positive=True)


def to_coordinates(potential: Potential, e: sympy.Expr) -> sympy.Expr:
    """Express radial fields through the working coordinates; they must occur in even powers where
    the coordinate is a square."""
    import sympy

    for i, c in enumerate(potential.coordinates):
        x = sympy.Symbol(c.name)
        if c.power == 1:
            e = e.subs(radial_field(i), x / c.scale)
        else:
            e = sympy.expand(e).subs(radial_field(i), sympy.sqrt(x / c.scale))
    return sympy.expand(e)


def mode_blocks(potential: Potential) -> ModeBlocks:
    """Group the radial Hessian into blocks that do not mix, and list the Goldstone masses."""
    import sympy

    count = len(potential.coordinates)
    hessian = sympy.Matrix(count, count, lambda i, j: derivative_by_fields(potential, (i, j)))
    goldstone = []
    for i, c in enumerate(potential.coordinates):
        if c.field.components != 1:
            mass = sympy.expand(derivative_by_fields(potential, (i,)) / radial_field(i))
            goldstone.append((c.field.components - 1, to_coordinates(potential, mass)))
    return ModeBlocks(radial=tuple(_connected(hessian)), goldstone=tuple(goldstone))


def _connected(matrix: sympy.Matrix) -> list[sympy.Matrix]:
    left = list(range(matrix.rows))
    blocks = []
    while left:
        block = [left.pop(0)]
        for i in block:
            joined = [j for j in left if matrix[i, j] != 0]
            block.extend(joined)
            left = [j for j in left if j not in joined]
        blocks.append(matrix.extract(block, block))
    return blocks


def determinants(
    potential: Potential, blocks: ModeBlocks, mass: sympy.Symbol
) -> list[tuple[sympy.Expr, sympy.Expr]]:
    """(multiplicity, det(P + mass matrix)) of every block, in coordinates and jets."""
    import sympy

    found = [(m, mass + w) for m, w in blocks.goldstone]
    for block in blocks.radial:
        if block.rows == 1:
            det = mass + to_coordinates(potential, block[0, 0])
        else:
            # Berkowitz keeps the entries polynomial; the field symbols occur squared once it is expanded
            shifted = sympy.eye(block.rows) * mass + block
            det = to_coordinates(potential, shifted.det(method="berkowitz"))
        found.append((sympy.Integer(1), det))
    return found


def canonical_part(
    potential: Potential, dimension: sympy.Expr, etas: dict[str, sympy.Expr]
) -> sympy.Expr:
    """-d V + sum_i power_i (d - 2 + eta_i)/2 x_i dV/dx_i: the flow of a dimensionless potential at fixed
    dimensionless renormalised coordinates."""
    import sympy

    count = len(potential.coordinates)
    total = -dimension * jet_of(potential, (0,) * count)
    for i, c in enumerate(potential.coordinates):
        one = tuple(int(j == i) for j in range(count))
        scaling = sympy.Rational(c.power, 2) * (dimension - 2 + etas.get(c.field.name, 0))
        total += scaling * sympy.Symbol(c.name) * jet_of(potential, one)
    return total


def jets_in(name: str, count: int, expressions: list[sympy.Expr]) -> tuple[tuple[int, ...], ...]:
    """Which derivatives of the function `name` occur, in rising order."""
    free = {s.name for e in expressions for s in e.free_symbols}
    highest = 6
    candidates = sorted(product(range(highest + 1), repeat=count), key=lambda o: (sum(o), o))
    return tuple(o for o in candidates if symbols.jet(name, o).name in free)


def positivity_expressions(potential: Potential, blocks: ModeBlocks) -> tuple[sympy.Expr, ...]:
    """Masses whose regulated propagators must stay positive; a mixing block contributes its
    diagonal entries (they bound the smallest eigenvalue from above)."""
    masses = [w for _, w in blocks.goldstone]
    for block in blocks.radial:
        masses += [to_coordinates(potential, block[i, i]) for i in range(block.rows)]
    return tuple(masses)


def coordinate_names(coordinates: tuple[Coordinate, ...]) -> tuple[str, ...]:
    return tuple(c.name for c in coordinates)
