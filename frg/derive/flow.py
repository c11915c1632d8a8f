"""The entry of the stage: `derive_flow(truncation, regulator) -> FlowEquations`."""

from __future__ import annotations

from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.equations import (
    AnomalousDimension,
    FlowEquations,
    FunctionFlow,
    InvariantExpansion,
    PolynomialPotential,
)
from frg.derive.flat.lagrangian import Potential, read_potential, split_kinetic, wave_function_of
from frg.derive.flat.odd import odd_sector
from frg.derive.flat.potential import (
    canonical_part,
    coordinate_names,
    determinants,
    jets_in,
    mode_blocks,
    positivity_expressions,
)
from frg.derive.flat.wavefunction import anomalous_dimension
from frg.derive.loops import LoopBook
from frg.derive.sphere.flow import sphere_flow
from frg.derive.typed.flow import typed_flow
from frg.language.truncation import Truncation
from frg.regulator.base import AbstractRegulator

if TYPE_CHECKING:
    import sympy


def derive_flow(
    truncation: Truncation, regulator: AbstractRegulator, *, close_loops: bool = True
) -> FlowEquations:
    """Derive the Wetterich flow of a truncation: in flat space, on the sphere, or typed in.

    `close_loops` does the loops of the flat shape with alpha = 1 in closed form (exact); set it to False
    to keep integrands, for example to differentiate by alpha. Raises NotYet or InputError."""
    value = truncation.numeric(truncation.dimension)
    book = LoopBook(regulator, truncation.dimension, close=close_loops, dimension_value=value)
    if truncation.flow is not None:
        return typed_flow(truncation, book)
    if truncation.gravity is not None:
        return sphere_flow(truncation, book)
    return _flat_flow(truncation, book)


def _flat_flow(truncation: Truncation, book: LoopBook) -> FlowEquations:
    import sympy

    kinetic, rest = split_kinetic(truncation)
    waves = wave_function_of(truncation, kinetic)
    potential = read_potential(truncation, rest)
    single = all(truncation.numeric(f.components) == 1 for f in truncation.fields)
    anomalous = tuple(anomalous_dimension(potential, wave, book, single) for wave in waves.values())
    etas = {a.field: sympy.Symbol(a.symbol) for a in anomalous}
    eta = next(iter(etas.values()), sympy.Integer(0))
    blocks = mode_blocks(potential)
    mass = sympy.Symbol("P{}")
    trace = book.log_determinant(determinants(potential, blocks, mass), mass, eta)
    rhs = canonical_part(potential, truncation.dimension, etas) + symbols.volume() * trace
    odd = odd_sector(potential, book, eta)
    count = len(potential.coordinates)
    jets = jets_in(potential.name, count, [rhs, *(loop.integrand for loop in book.loops)])
    return FlowEquations(
        truncation=truncation, regulator=book.regulator,
        functions=_function_flows(potential, rhs, jets), couplings=(),
        potential=_polynomial(potential, rhs, jets), invariants=_invariants(potential),
        anomalous=anomalous, odd=odd, loops=tuple(book.loops),
        positivity=positivity_expressions(potential, blocks), closed=not book.loops,
        notes=_notes(anomalous),
    )


def _function_flows(
    potential: Potential, rhs: sympy.Expr, jets: tuple[tuple[int, ...], ...]
) -> tuple[FunctionFlow, ...]:
    if potential.function is None or potential.invariants:
        return ()
    names = coordinate_names(potential.coordinates)
    return (
        FunctionFlow(
            name=potential.name, coordinates=names, rhs=rhs, jets=jets, declared=potential.function
        ),
    )


def _polynomial(
    potential: Potential, rhs: sympy.Expr, jets: tuple[tuple[int, ...], ...]
) -> PolynomialPotential | None:
    if potential.function is not None and not potential.invariants:
        return None
    return PolynomialPotential(
        name=potential.name, coordinates=coordinate_names(potential.coordinates), rhs=rhs, jets=jets,
        couplings=potential.couplings, terms=potential.terms,
        parity=tuple(1 for _ in potential.coordinates),
    )


def _invariants(potential: Potential) -> InvariantExpansion | None:
    if potential.function is None or not potential.invariants:
        return None
    return InvariantExpansion(function=potential.function, invariants=potential.invariants)


def _notes(anomalous: tuple[AnomalousDimension, ...]) -> tuple[str, ...]:
    return tuple(
        f"eta of {a.field} is read from the {a.mode} mode at "
        f"{'the minimum of the potential' if a.at == 'minimum' else a.at}"
        for a in anomalous
    )
