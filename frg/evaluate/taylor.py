"""Taylor expansion about a number or about the running minimum, in one or several coordinates."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from frg.derive import symbols
from frg.evaluate.discretisation import AbstractDiscretisation
from frg.evaluate.jaxload import load
from frg.evaluate.series import Series, SeriesAlgebra


@dataclass(frozen=True, kw_only=True)
class TaylorFunction:
    """One expanded function: highest total degree by order of the study, whether its constant term is
    an unknown, and whether coefficients are reported as derivatives (factor n!) or as powers."""

    name: str
    degree_at: Mapping[int, int]
    constant: bool
    derivative: bool

    @property
    def degree(self) -> int:
        return max(self.degree_at.values())


@dataclass(frozen=True, kw_only=True)
class Taylor(AbstractDiscretisation):
    """Functions of `coordinates` expanded about `about` (numbers), or about the running minimum of the
    first function (about = None, one coordinate): the minimum takes the place of its linear term.

    At the running minimum x0 with f_i the i-th coefficient in derivative normalisation,
    d_t f_i = (d_t f)^(i)(x0) + f_(i+1) d_t x0, and f_1 = 0 for the first function."""

    coordinates: tuple[str, ...]
    functions: tuple[TaylorFunction, ...]
    about: tuple[float, ...] | None
    jets: Mapping[str, tuple[tuple[int, ...], ...]]

    @cached_property
    def algebra(self) -> SeriesAlgebra:
        return SeriesAlgebra(len(self.coordinates), max(f.degree for f in self.functions))

    @property
    def moving(self) -> bool:
        return self.about is None

    @cached_property
    def layout(self) -> tuple[tuple[int, int], ...]:
        """(function index, monomial index) of every unknown; (0, 1) is the slot of the moving minimum."""
        found = []
        for f, function in enumerate(self.functions):
            for k, e in enumerate(self.algebra.exponents):
                if sum(e) <= function.degree and (sum(e) > 0 or function.constant):
                    found.append((f, k))
        return tuple(found)

    @cached_property
    def names(self) -> tuple[str, ...]:
        found = []
        for f, k in self.layout:
            name, e = self.functions[f].name, self.algebra.exponents[k]
            moving = self.moving and f == 0 and k == 1
            found.append(f"{name}_min" if moving else name + "_".join(str(i) for i in e))
        return tuple(found)

    def active(self, order: int | None) -> np.ndarray:
        degrees = self.algebra.degrees
        highest = [f.degree_at[order] if order is not None else f.degree for f in self.functions]
        return np.array([degrees[k] <= highest[f] for f, k in self.layout])

    @cached_property
    def factors(self) -> np.ndarray:
        """(size,) power-series coefficient = unknown / factor."""
        return np.array([
            math.prod(math.factorial(i) for i in self.algebra.exponents[k])
            if self.functions[f].derivative else 1.0
            for f, k in self.layout
        ], dtype=float)

    def unit(self, coordinate: float, value: float) -> np.ndarray:
        degrees = np.array([self.algebra.degrees[k] for _, k in self.layout], dtype=float)
        unit = self.factors * value / coordinate**degrees
        if self.moving:
            unit[self.layout.index((0, 1))] = coordinate
        return unit

    def expansion_point(self, g: Any) -> Any:
        return g[self.layout.index((0, 1))] if self.moving else None

    def _series(self, g: Any) -> list[Series]:
        jnp = load().numpy
        found = []
        for f in range(len(self.functions)):
            slots = [i for i, (owner, k) in enumerate(self.layout)
                     if owner == f and not (self.moving and f == 0 and k == 1)]
            monomials = np.array([self.layout[i][1] for i in slots])
            values = g[np.array(slots)] / self.factors[slots]
            found.append(Series(self.algebra, jnp.zeros(self.algebra.length, g.dtype).at[monomials].set(values)))
        return found

    def numbers(self, g: Any, box: Any) -> dict[str, Any]:
        centre = [self.expansion_point(g)] if self.about is None else list(self.about)
        env: dict[str, Any] = {
            name: self.algebra.variable(i, centre[i]) for i, name in enumerate(self.coordinates)
        }
        for function, series in zip(self.functions, self._series(g), strict=True):
            for orders in self.jets[function.name]:
                env[symbols.jet(function.name, orders).name] = series.derivative(orders)
        return env

    def rows(self, g: Any, flows: Mapping[str, Any]) -> Any:
        jnp = load().numpy
        values = []
        for i, (f, k) in enumerate(self.layout):
            number = flows[self.functions[f].name]
            coefficient = number.coefficients[k] if isinstance(number, Series) else (number if k == 0 else 0.0)
            values.append(coefficient * self.factors[i])
        return jnp.stack([jnp.asarray(v) for v in values])

    def mass(self, g: Any, box: Any) -> Any:
        jnp = load().numpy
        identity = jnp.eye(self.size)
        if not self.moving:
            return identity
        column = self.layout.index((0, 1))
        # coefficient i of the function's slope series at the moving point, in reported normalisation
        entries = []
        slopes = [s.derivative((1,)).coefficients for s in self._series(g)]
        for i, (f, k) in enumerate(self.layout):
            entries.append(-slopes[f][k] * self.factors[i])
        moved = jnp.stack(entries)
        return identity.at[:, column].set(moved)

    def search_rows(self, g: Any, b: Any) -> Any:
        """Divide the first row by f_2: with f' = 0 everywhere it vanishes for every minimum, a line of
        trivial solutions; the quotient is -d_t x0."""
        if not self.moving:
            return b
        row = self.layout.index((0, 1))
        return b.at[row].divide(g[self.layout.index((0, 2))])

    def jets_at(self, g: Any, x: Any, name: str, orders: tuple[int, ...], box: Any) -> Any:
        which = [f.name for f in self.functions].index(name)
        series = self._series(g)[which].derivative(orders).coefficients
        centre = self.expansion_point(g) if self.about is None else self.about[0]
        total = series[-1]
        for k in range(self.algebra.degree - 1, -1, -1):
            total = total * (x - centre) + series[k]
        return total
