"""Which search fits which flow."""

from __future__ import annotations

from frg.derive.equations import FlowEquations
from frg.evaluate.build import loop_rule
from frg.solve.curvaturesearch import CurvatureSearch
from frg.solve.gridsearch import GridSearch
from frg.solve.search import AbstractSearch, PolynomialSearch, SearchSettings


def make_search(
    equations: FlowEquations, orders: tuple[int, ...], settings: SearchSettings
) -> AbstractSearch:
    """The search that fits the discretisation the truncation asks for.

    Raises InputError or NotYet where the loops diverge or the truncation cannot be discretised as asked, before
    anything is computed or kept."""
    loop_rule(equations)
    if equations.functions and any(f.declared.grid for f in equations.functions):
        grid = GridSearch(equations=equations, settings=settings)
        grid.problem.flow  # noqa: B018  (refuses what a grid cannot do)
        return grid
    if equations.truncation.gravity is not None and equations.functions:
        curvature = CurvatureSearch(equations=equations, orders=orders, settings=settings)
        curvature.flow  # noqa: B018  (likewise)
        return curvature
    polynomial = PolynomialSearch(equations=equations, orders=orders, settings=settings)
    polynomial.flow  # noqa: B018  (likewise)
    return polynomial
