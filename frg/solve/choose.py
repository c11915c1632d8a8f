"""Which search fits which flow."""

from __future__ import annotations

from frg.derive.equations import FlowEquations
from frg.derive.flow import derive_flow
from frg.errors import InputError, Place
from frg.evaluate.build import loop_rule
from frg.regulator.shapes import Flat
from frg.solve.curvaturesearch import CurvatureSearch
from frg.solve.gridsearch import GridSearch
from frg.solve.opencurvature import OpenCurvatureSearch
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
        return _curvature_search(equations, orders, settings)
    polynomial = PolynomialSearch(equations=equations, orders=orders, settings=settings)
    polynomial.flow  # noqa: B018  (likewise)
    return polynomial


def _curvature_search(
    equations: FlowEquations, orders: tuple[int, ...], settings: SearchSettings
) -> CurvatureSearch:
    if not orders:
        raise InputError(
            "a function of R needs an order", remedy='write order = "n" and [study] values, or give --order',
            place=Place(source=equations.truncation.source),
        )
    if equations.closed:
        return CurvatureSearch(equations=equations, orders=orders, settings=settings)
    # the guard needs a flow that exists: powers beyond those derived are looked at up to the last one
    (function,) = equations.functions
    powers = {n: equations.truncation.order_of(function.declared, n) or 0 for n in orders}
    limit = equations.highest_order or max(powers.values())
    kept = tuple(n for n in orders if powers[n] <= limit)
    if not kept:
        kept = tuple(n for n in range(1, max(orders)) if (equations.truncation.order_of(function.declared, n) or 0) == limit)
    reference = derive_flow(equations.truncation, Flat())
    found = OpenCurvatureSearch(equations=equations, orders=kept, settings=settings, reference=reference)
    found.refuse_meaningless(max(powers.values()))
    return found
