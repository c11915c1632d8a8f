"""Evaluating stored fixed points afresh, from the stored truncation text alone."""

from __future__ import annotations

import numpy as np

from frg.cli.problem import problem_from_run
from frg.errors import FrgError
from frg.evaluate.build import flow_arguments
from frg.evaluate.flow import Arguments, Flow
from frg.records import FixedPoint, Run
from frg.solve.fixedpoint import Examiner
from frg.solve.functional import GridProblem
from frg.solve.search import PolynomialSearch, lowest_of

AGREEMENT = 1e-7  # of recomputed with stored exponents, relative to max(1, |theta|)

Row = tuple[str, bool | None, str]


def recheck(run: Run) -> list[Row]:
    """Rows (name, passed, detail): residuals and exponents of all stored fixed points, recomputed."""
    try:
        problem = problem_from_run(run.inputs)
    except FrgError as error:
        return [("stored truncation", False, str(error).splitlines()[0])]
    orders = tuple(int(n) for n in run.inputs.settings.get("orders", ()))  # type: ignore[attr-defined]
    grid = bool(problem.equations.functions) and problem.equations.functions[0].declared.grid is not None
    if grid:
        points = problem.equations.functions[0].declared.grid.points  # type: ignore[union-attr]
        flow = GridProblem(equations=problem.equations, points=points).flow
    else:
        from frg.cli.settings import search_settings

        search = PolynomialSearch(
            equations=problem.equations, orders=orders, settings=search_settings(thorough=False)
        )
        flow = search.flow
    examiner = Examiner(flow=flow, lowest=lowest_of(problem.equations))
    tolerance = float(run.inputs.settings.get("residual_tolerance", 1e-8))  # type: ignore[arg-type]
    residuals, exponents, count = [], [], 0
    for number, step in enumerate(run.steps):
        order = next(iter(step.order.values()), None)
        for point in step.fixed_points:
            count += 1
            where = f"step {number}, {point.label}"
            args = flow_arguments(flow, box=point.landmarks.get("box", 1.0))
            wrong = _compare(examiner, flow, point, order, args, tolerance)
            residuals += [f"{where}: {w}" for w in wrong[0]]
            exponents += [f"{where}: {w}" for w in wrong[1]]
    return [
        (f"residuals recomputed at {count} fixed points", not residuals, "; ".join(residuals[:3])),
        (f"exponents recomputed at {count} fixed points", not exponents, "; ".join(exponents[:3])),
    ]


def _compare(
    examiner: Examiner, flow: Flow, point: FixedPoint, order: int | None, args: Arguments, tolerance: float
) -> tuple[list[str], list[str]]:
    stored = dict(zip(point.names, point.couplings, strict=True))
    if "minimum{}" in flow.names:
        stored["minimum{}"] = point.landmarks.get("minimum for eta", 0.0)
    unknown = set(point.names) - set(flow.names)
    if unknown:
        return [f"couplings {', '.join(sorted(unknown))} do not belong to this truncation"], []
    g = np.array([stored.get(name, 0.0) for name in flow.names])
    active = flow.active(order)
    measured = examiner.measure(g, active, args, 0)
    residuals = []
    if not measured.residual < tolerance:
        residuals.append(f"max |beta| is {measured.residual:.2e}, the bound is {tolerance:.0e}")
    exponents = []
    for value in point.theta:
        gap = float(np.min(np.abs(measured.spectrum.theta - value)))
        if not gap < AGREEMENT * max(1.0, abs(value)):
            exponents.append(f"stored theta {value:.8g} differs from the nearest recomputed one by {gap:.1e}")
    return residuals, exponents
