"""The action F(R) of a truncation: its derivatives by R, and their t-derivatives at fixed R.

Everything is in units of k at the moment considered, so that R, the couplings and the jets are the dimensionless
ones; the t-derivative still acts on the dimensionful quantities: a coupling g k^[g] gives d_t g + [g] g, and
F^(j) = k^(d-2j) f^(j)(R/k^2) gives d_t f^(j) + (d-2j) f^(j) - 2 R f^(j+1).
"""

from __future__ import annotations

import abc
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.sphere.hessian import curvature
from frg.errors import InputError, Place
from frg.language.truncation import Truncation

if TYPE_CHECKING:
    import sympy


@dataclass(frozen=True, kw_only=True)
class AbstractAction(abc.ABC):
    """F(R) with what runs in it."""

    truncation: Truncation

    @abc.abstractmethod
    def jet(self, order: int) -> sympy.Expr:
        """F^(order)(R)."""

    @abc.abstractmethod
    def rate(self, expression: sympy.Expr) -> sympy.Expr:
        """The t-derivative at fixed dimensionful R of an expression in the jets or couplings, linear in the
        symbols `symbols.rate`."""


@dataclass(frozen=True, kw_only=True)
class FunctionAction(AbstractAction):
    """F = k^d f(R/k^2) with one running function."""

    @property
    def name(self) -> str:
        return self.truncation.functions[0].name

    def jet(self, order: int) -> sympy.Expr:
        return symbols.jet(self.name, (order,))

    def rate(self, expression: sympy.Expr) -> sympy.Expr:
        import sympy

        d, R = self.truncation.dimension, curvature()
        total = sympy.Integer(0)
        for j in range(HIGHEST_JET + 1):
            slope = expression.diff(self.jet(j))
            if slope != 0:
                moved = symbols.rate(self.name, (j,)) + (d - 2 * j) * self.jet(j) - 2 * R * self.jet(j + 1)
                total += slope * moved
        return total


HIGHEST_JET = 4


@dataclass(frozen=True, kw_only=True)
class CouplingAction(AbstractAction):
    """F a polynomial in R whose coefficients are expressions in couplings."""

    @cached_property
    def lagrangian(self) -> sympy.Expr:
        lagrangian = self.truncation.lagrangian
        assert lagrangian is not None
        return self.truncation.expanded(lagrangian)

    @cached_property
    def powers(self) -> tuple[int, ...]:
        """Powers of R that occur, rising."""
        import sympy

        return tuple(sorted(k for (k,), _ in sympy.Poly(self.lagrangian, curvature()).terms()))

    @cached_property
    def dimensions(self) -> dict[str, sympy.Expr]:
        """[g] in powers of k for every coupling: those that give every term of F the dimension d, R having 2.

        Raises InputError where the action does not fix them."""
        import sympy

        d, names = self.truncation.dimension, [c.name for c in self.truncation.couplings]
        unknown = {n: sympy.Symbol(f"dimension of {n}") for n in names}
        conditions = []
        for (k,), coefficient in sympy.Poly(self.lagrangian, curvature()).terms():
            # homogeneous: sum_g [g] g dc/dg = (d - 2k) c
            euler = sum(unknown[n] * sympy.Symbol(n) * coefficient.diff(sympy.Symbol(n)) for n in names)
            ratio = sympy.simplify(euler / coefficient)
            conditions.append(sympy.Eq(ratio, d - 2 * k))
        solutions = sympy.solve(conditions, list(unknown.values()), dict=True)
        free = set().union(*(s.free_symbols for s in solutions[0].values())) if solutions else set()
        names_known = bool(solutions) and len(solutions[0]) == len(names) and not (free & set(unknown.values()))
        if not names_known or any(s.has(sympy.Symbol(n)) for s in solutions[0].values() for n in names):
            raise InputError(
                "the action does not fix the dimensions of its couplings",
                remedy="let every coupling multiply powers of R in a product, as in (2*Lambda - R)/(16*pi*G)",
                place=Place(source=self.truncation.source),
            )
        return {n: sympy.simplify(solutions[0][unknown[n]]) for n in names}

    def jet(self, order: int) -> sympy.Expr:
        return self.lagrangian.diff(curvature(), order) if order else self.lagrangian

    def rate(self, expression: sympy.Expr) -> sympy.Expr:
        import sympy

        total = sympy.Integer(0)
        for name, dimension in self.dimensions.items():
            g = sympy.Symbol(name)
            total += expression.diff(g) * (symbols.rate(name) + dimension * g)
        return total


def action_of(truncation: Truncation) -> AbstractAction:
    return (FunctionAction if truncation.functions else CouplingAction)(truncation=truncation)
