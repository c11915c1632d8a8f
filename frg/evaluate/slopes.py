"""Flows that are local and closed, linearised term by term instead of by automatic differentiation.

For one function of one coordinate x with d_t f given by E(x; f, f', ...; d_t f, ...), the derivative of row k by the
l-th Taylor coefficient is sum_j [x^k] (dE/df^(j)) (x^l)^(j): a gather of the series dE/df^(j). It costs as much as a
few products of series, against one product for every unknown with automatic differentiation.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from frg.derive import symbols
from frg.derive.equations import FlowEquations
from frg.evaluate.jaxload import load
from frg.evaluate.series import Series, series_arithmetic
from frg.evaluate.taylor import Taylor
from frg.language.program import Program, compile_expressions


def has_slopes(equations: FlowEquations, block: object) -> bool:
    """True for one implicit, closed flow of a function expanded about a number in one coordinate."""
    return (
        isinstance(block, Taylor) and not block.moving and len(block.functions) == 1 and len(block.coordinates) == 1
        and len(equations.functions) == 1 and bool(equations.functions[0].rates) and not equations.loops
        and not equations.couplings and not equations.anomalous
    )


@dataclass(frozen=True, kw_only=True, eq=False)
class LocalSlopes:
    """The flow b, its derivative by the unknowns, and the matrix M of M dg/dt = b, all in reported unknowns."""

    equations: FlowEquations
    block: Taylor

    @cached_property
    def _program(self) -> Program:
        (flow,) = self.equations.functions
        still = {symbols.rate(flow.name, o): 0 for o in flow.rates}
        right = flow.rhs.subs(still)
        by_jet = [right.diff(symbols.jet(flow.name, o)) for o in flow.jets]
        by_rate = [-flow.rhs.diff(symbols.rate(flow.name, o)) for o in flow.rates]
        return compile_expressions([right, *by_jet, *by_rate])

    @cached_property
    def _tables(self) -> tuple[dict[int, np.ndarray], dict[int, np.ndarray]]:
        """By the order j of the derivative: (index of the series' coefficient, factor), both (size, size)."""
        degrees = np.array([self.block.algebra.degrees[k] for _, k in self.block.layout])
        length = self.block.algebra.length
        index, factor = {}, {}
        (flow,) = self.equations.functions
        for (j,) in {*flow.jets, *flow.rates}:
            where = degrees[:, None] - degrees[None, :] + j
            falling = np.prod([degrees - i for i in range(j)], axis=0) if j else np.ones(len(degrees))
            inside = (where >= 0) & (where < length) & (degrees[None, :] >= j)
            index[j] = np.where(inside, where, 0)
            factor[j] = np.where(inside, falling[None, :], 0.0)
            factor[j] = factor[j] * self.block.factors[:, None] / self.block.factors[None, :]
        return index, factor

    def evaluate(self, g: Any, parameters: dict[str, Any], box: Any) -> tuple[Any, Any, Any]:
        """(b, db/dg, M): (size,), (size, size), (size, size)."""
        (flow,) = self.equations.functions
        env = {**parameters, **self.block.numbers(g, box)}
        right, *slopes = self._program.run(env, series_arithmetic())
        b = self.block.rows(g, {flow.name: right})
        return b, self._matrix(flow.jets, slopes[: len(flow.jets)]), self._matrix(flow.rates, slopes[len(flow.jets) :])

    def _matrix(self, orders: tuple[tuple[int, ...], ...], slopes: list[Any]) -> Any:
        jnp = load().numpy
        index, factor = self._tables
        total = jnp.zeros((self.block.size, self.block.size))
        for (j,), slope in zip(orders, slopes, strict=True):
            series = slope.coefficients if isinstance(slope, Series) else (
                jnp.zeros(self.block.algebra.length).at[0].set(slope)
            )
            total = total + series[index[j]] * factor[j]
        return total
