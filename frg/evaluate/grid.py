"""Chebyshev collocation on [0, R] in one coordinate, without boundary conditions.

Unknowns are Chebyshev coefficients; every node satisfies the flow. Regularity at 0 and smoothness up to
R, well beyond the minimum, select the isolated global solutions; derivatives act on coefficients by
the exact recursion.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from frg.derive import symbols
from frg.evaluate.discretisation import AbstractDiscretisation
from frg.evaluate.jaxload import load


@dataclass(frozen=True, kw_only=True)
class ChebyshevGrid(AbstractDiscretisation):
    """Functions on a common grid of `points` Gauss nodes; the box size R is an argument (`box`)."""

    coordinate: str
    functions: tuple[str, ...]
    points: int
    jets: Mapping[str, tuple[tuple[int, ...], ...]]

    @cached_property
    def names(self) -> tuple[str, ...]:
        return tuple(f"{f}[{k}]" for f in self.functions for k in range(self.points))

    def active(self, order: int | None) -> np.ndarray:
        return np.ones(self.size, dtype=bool)

    def unit(self, coordinate: float, value: float) -> np.ndarray:
        return np.full(self.size, value)

    @cached_property
    def nodes(self) -> np.ndarray:
        """(points,) Gauss nodes in (-1, 1), rising."""
        return -np.cos(np.pi * (np.arange(self.points) + 0.5) / self.points)

    @cached_property
    def differentiation(self) -> np.ndarray:
        """(points, points) Chebyshev coefficients of the derivative on [-1, 1] from coefficients."""
        matrix = np.zeros((self.points, self.points))
        for k in range(1, self.points):
            unit = np.zeros(self.points)
            unit[k] = 1.0
            matrix[: self.points - 1, k] = np.polynomial.chebyshev.chebder(unit)
        return matrix

    def evaluation(self, order: int, at: np.ndarray | None = None) -> np.ndarray:
        """(m, points) matrix from coefficients to the derivative on [-1, 1] at the nodes or at `at`."""
        values = np.polynomial.chebyshev.chebvander(self.nodes if at is None else at, self.points - 1)
        return values @ np.linalg.matrix_power(self.differentiation, order)

    def coordinate_values(self, box: Any) -> Any:
        return (self.nodes + 1) * box / 2

    def coefficients_of(self, values: np.ndarray) -> np.ndarray:
        """Chebyshev coefficients of the interpolant through values at the nodes."""
        return np.linalg.solve(self.evaluation(0), values)

    def _block(self, g: Any, name: str) -> Any:
        start = self.functions.index(name) * self.points
        return g[start : start + self.points]

    def numbers(self, g: Any, box: Any) -> dict[str, Any]:
        env: dict[str, Any] = {self.coordinate: self.coordinate_values(box)}
        for name in self.functions:
            for orders in self.jets[name]:
                (k,) = orders
                value = self.evaluation(k) @ self._block(g, name) * (2 / box) ** k
                env[symbols.jet(name, orders).name] = value
        return env

    def rows(self, g: Any, flows: Mapping[str, Any]) -> Any:
        jnp = load().numpy
        return jnp.concatenate([jnp.broadcast_to(flows[f], (self.points,)) for f in self.functions])

    def mass(self, g: Any, box: Any) -> Any:
        return load().numpy.asarray(np.kron(np.eye(len(self.functions)), self.evaluation(0)))

    def jets_at(self, g: Any, x: Any, name: str, orders: tuple[int, ...], box: Any) -> Any:
        jnp = load().numpy
        (k,) = orders
        coefficients = np.linalg.matrix_power(self.differentiation, k) @ self._block(g, name)
        position = 2 * x / box - 1
        # Clenshaw's recurrence, valid for any position, differentiable in it
        above, this = jnp.zeros_like(position), jnp.zeros_like(position)
        for j in range(self.points - 1, 0, -1):
            above, this = this, coefficients[j] + 2 * position * this - above
        return (coefficients[0] + position * this - above) * (2 / box) ** k
