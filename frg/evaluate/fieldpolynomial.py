"""Potentials written in couplings of monomials of the fields, expanded about vanishing fields."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from frg.derive import symbols
from frg.evaluate.discretisation import AbstractDiscretisation
from frg.evaluate.jaxload import load
from frg.evaluate.series import Series, SeriesAlgebra, series_arithmetic
from frg.language.program import Program


@dataclass(frozen=True, kw_only=True, eq=False)
class FieldPolynomial(AbstractDiscretisation):
    """V = sum_m c_m(g) * monomial_m in the field coordinates, c_m given by `program` from the couplings.

    The flow of V is projected on `pivots`, one monomial for each coupling, such that the leading blocks of
    dc/dg on them are regular; then M = dc_pivot/dg and b = (d_t V)_pivot. `degree_of` is the order at which a
    coupling enters (the degree in the invariants); `field_degree` its number of fields."""

    name: str
    coordinates: tuple[str, ...]
    powers: tuple[int, ...]
    couplings: tuple[str, ...]
    degree_of: tuple[int, ...]
    field_degree: tuple[int, ...]
    limit_at: Mapping[int, int]
    degree: int
    exponents: tuple[tuple[int, ...], ...]
    program: Program
    pivots: tuple[int, ...]
    jets: Sequence[tuple[int, ...]]

    @cached_property
    def algebra(self) -> SeriesAlgebra:
        return SeriesAlgebra(len(self.coordinates), self.degree)

    @property
    def names(self) -> tuple[str, ...]:
        return self.couplings

    def active(self, order: int | None) -> np.ndarray:
        limit = self.limit_at[order] if order is not None and self.limit_at else max(self.degree_of)
        return np.array([k <= limit for k in self.degree_of])

    def unit(self, coordinate: float, value: float) -> np.ndarray:
        return value / coordinate ** (np.array(self.field_degree) / 2)

    def coefficients(self, g: Any) -> Any:
        """(number of monomials,) coefficients c(g) of the potential, in the order of `exponents`."""
        jnp = load().numpy
        values = {name: g[i] for i, name in enumerate(self.couplings)}
        found = self.program.run(values, series_arithmetic())
        return jnp.stack([jnp.asarray(v, dtype=g.dtype) for v in found])

    def numbers(self, g: Any, box: Any) -> dict[str, Any]:
        jnp = load().numpy
        where = np.array([self.algebra.index[e] for e in self.exponents])
        flat = jnp.zeros(self.algebra.length, g.dtype).at[where].set(self.coefficients(g))
        series = Series(self.algebra, flat)
        env: dict[str, Any] = {
            name: self.algebra.variable(i, 0.0) for i, name in enumerate(self.coordinates)
        }
        for orders in self.jets:
            env[symbols.jet(self.name, orders).name] = series.derivative(orders)
        return env

    def rows(self, g: Any, flows: Mapping[str, Any]) -> Any:
        where = np.array([self.algebra.index[self.exponents[p]] for p in self.pivots])
        return flows[self.name].coefficients[where]

    def mass(self, g: Any, box: Any) -> Any:
        jax = load().jax
        return jax.jacfwd(self.coefficients)(g)[np.array(self.pivots), :]

    def jets_at(self, g: Any, x: Any, name: str, orders: tuple[int, ...], box: Any) -> Any:
        raise AssertionError("potentials in monomials carry no anomalous dimension")


def choose_pivots(matrix: np.ndarray, field_degrees: Sequence[int]) -> tuple[int, ...]:
    """One row for each column, greedily from low field degree, so that all leading blocks are regular.

    `matrix` (monomials, couplings) is dc/dg at a generic point. Raises ValueError if the couplings are not
    independent."""
    work = np.array(matrix, dtype=float)
    rows, columns = work.shape
    chosen: list[int] = []
    for j in range(columns):
        candidates = [i for i in range(rows) if i not in chosen and abs(work[i, j]) > 1e-12]
        if not candidates:
            raise ValueError(f"coupling number {j + 1} multiplies nothing of its own")
        pivot = max(candidates, key=lambda i: abs(work[i, j]))
        chosen.append(pivot)
        for k in range(j + 1, columns):
            work[:, k] -= work[:, j] * work[pivot, k] / work[pivot, j]
    return tuple(chosen)
