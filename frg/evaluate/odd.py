"""The linear operator of perturbations odd in the field, on the discretisation of their background."""

from __future__ import annotations

from typing import Any

import numpy as np

from frg.derive import symbols
from frg.evaluate.flow import Arguments, Flow
from frg.evaluate.grid import ChebyshevGrid
from frg.evaluate.jaxload import load
from frg.evaluate.series import Series
from frg.evaluate.taylor import Taylor
from frg.language.program import compile_expressions


def odd_operator(flow: Flow, g: Any, args: Arguments) -> tuple[Any, np.ndarray] | None:
    """(J, M) of M dh/dt = J h for the unknowns of h: Taylor coefficients about the background's expansion
    point (h to the same degree as U), or Chebyshev coefficients on its grid. None where there is no odd sector.

    `g` is a fixed point in reported unknowns. At a fixed point the expansion point does not move."""
    odd = flow.equations.odd
    if odd is None or not isinstance(flow.block, Taylor | ChebyshevGrid):
        return None
    jax = load().jax
    block = flow.block
    size = block.algebra.length if isinstance(block, Taylor) else block.points
    program = compile_expressions([odd.rhs])
    background = flow.environment(g, args)

    def flow_of(h: Any) -> Any:
        env = background | _jets(block, h, odd.name, odd.jets, args)
        (value,) = flow._with_loops(program, env, args.rule)
        return value.coefficients if isinstance(value, Series) else value

    jacobian = jax.jacfwd(flow_of)(load().numpy.zeros(size))
    mass = np.eye(size) if isinstance(block, Taylor) else block.evaluation(0)
    return jacobian, mass


def _jets(
    block: Taylor | ChebyshevGrid, h: Any, name: str, orders: tuple[tuple[int, ...], ...], args: Arguments
) -> dict[str, Any]:
    env: dict[str, Any] = {}
    for order in orders:
        key = symbols.jet(name, order).name
        if isinstance(block, Taylor):
            env[key] = Series(block.algebra, h).derivative(order)
        else:
            env[key] = block.evaluation(order[0]) @ h * (2 / args.box) ** order[0]
    return env


def odd_scale(flow: Flow, coordinate: float) -> np.ndarray:
    """Natural size of the unknowns of h, to balance its matrix."""
    if isinstance(flow.block, Taylor):
        return np.array([coordinate ** -float(k) for k in range(flow.block.algebra.length)])
    assert isinstance(flow.block, ChebyshevGrid)
    return np.ones(flow.block.points)


def odd_active(flow: Flow, order: int | None) -> np.ndarray:
    """Which unknowns of h exist at an order of the study."""
    if isinstance(flow.block, Taylor):
        degrees = flow.block.functions[0].degree_at
        highest = degrees[order] if order is not None else max(degrees.values())
        return np.arange(flow.block.algebra.length) <= highest
    assert isinstance(flow.block, ChebyshevGrid)
    return np.ones(flow.block.points, dtype=bool)


