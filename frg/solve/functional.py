"""Global fixed points on a Chebyshev grid: starts from shooting, Newton, and a spectrum cleaned of grid
artefacts by comparison with a second grid."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from frg.derive.equations import FlowEquations
from frg.evaluate.build import build_flow, dimension_value, flow_arguments, natural_units
from frg.evaluate.flow import Arguments, Flow
from frg.evaluate.grid import ChebyshevGrid
from frg.evaluate.jaxload import load
from frg.solve.shooting import Shot


@dataclass(frozen=True, kw_only=True)
class GridNewton:
    """At most `iterations` steps with up to `halvings` halvings; finished when the relative step stops falling
    below `step`."""

    iterations: int
    halvings: int
    step: float


@dataclass(frozen=True, kw_only=True, eq=False)
class GridSolution:
    """A fixed point on one grid: scaled unknowns, the arguments (box, scale) it belongs to, last relative step."""

    flow: Flow
    args: Arguments
    unknowns: np.ndarray
    step: float


STEEP = 0.3
WITHOUT_MINIMUM = 12.0  # the scale on which a Gaussian spectrum becomes visible, in natural units of the coordinate
EXACT = 1e-14  # a residual at round-off needs no further step; beside a marginal direction the step has no meaning


@dataclass(frozen=True, kw_only=True, eq=False)
class GridProblem:
    """The compiled residual and Jacobian of a flow on a grid with a given number of points."""

    equations: FlowEquations
    points: int

    @cached_property
    def flow(self) -> Flow:
        (function,) = self.equations.functions
        grid = function.declared.grid
        assert grid is not None
        declared = dataclasses.replace(function.declared, grid=dataclasses.replace(grid, points=self.points))
        changed = dataclasses.replace(
            self.equations, functions=(dataclasses.replace(function, declared=declared),)
        )
        return build_flow(changed, ())

    @cached_property
    def grid(self) -> ChebyshevGrid:
        block = self.flow.block
        assert isinstance(block, ChebyshevGrid)
        return block

    @cached_property
    def compiled(self) -> Any:
        jax = load().jax
        return jax.jit(self.flow.system)

    @cached_property
    def _plain(self) -> Arguments:
        return flow_arguments(self.flow)

    @cached_property
    def unit(self) -> float:
        """Natural size of the coordinate."""
        return natural_units(self.flow, self._plain)[0]

    def arguments(self, box: float) -> Arguments:
        """Arguments for a box; the scale of the unknowns does not depend on it."""
        return self._plain._replace(box=load().numpy.asarray(float(box)))

    def start(self, shot: Shot, upto: float) -> tuple[np.ndarray, Arguments]:
        """Scaled unknowns and arguments for a candidate: the followed part, then its power-law growth
        x^(d/(d-2)), on a box of `upto` times its extent."""
        size = self.unit
        minimum = outermost_minimum(shot.x, shot.slope)
        box = upto * extent(shot.x, shot.slope, size)
        args = self.arguments(box)
        values = self._extended(shot, np.asarray(self.grid.coordinate_values(box)))
        c = self.grid.coefficients_of(values)
        if self.flow.minimum_function:
            c = np.append(c, minimum if minimum is not None else size)
        return c / np.asarray(args.scale), args

    def _extended(self, shot: Shot, x: np.ndarray) -> np.ndarray:
        d = dimension_value(self.equations)
        power = d / (d - 2) if d > 2 else 6.0
        from scipy.interpolate import CubicHermiteSpline

        known = np.concatenate([[0.0], shot.x])
        values = np.concatenate([[shot.u[0] - shot.sigma * shot.x[0]], shot.u])
        inner = CubicHermiteSpline(known, values, np.concatenate([[shot.sigma], shot.slope]))(x)
        end, u_end, slope_end = shot.x[-1], shot.u[-1], shot.slope[-1]
        growth = slope_end * end / power
        return np.where(x <= end, inner, u_end + growth * ((x / end) ** power - 1))

    def solve(self, c: np.ndarray, args: Arguments, newton: GridNewton) -> GridSolution | None:
        """Damped Newton; None where it leaves the finite numbers or does not settle."""
        compiled, relative = self.compiled, float("inf")
        for _ in range(newton.iterations):
            b, J, _ = (np.asarray(v) for v in compiled(c, args))
            if not (np.isfinite(b).all() and np.isfinite(J).all()):
                return None
            if np.max(np.abs(b)) < EXACT:
                return GridSolution(flow=self.flow, args=args, unknowns=c, step=min(relative, newton.step))
            weight = 1 / np.maximum(np.abs(J).sum(axis=1), 1e-300)
            # least squares, because a marginal direction makes the Jacobian singular at a genuine fixed point
            p = np.linalg.lstsq(J * weight[:, None], -b * weight, rcond=1e-13)[0]
            norm, taken = np.max(np.abs(b * weight)), None
            for halving in range(newton.halvings + 1):
                trial = c + 0.5**halving * p
                value = np.asarray(compiled(trial, args)[0])
                if np.isfinite(value).all() and (np.max(np.abs(value * weight)) < norm or halving == 0 and norm < 1e-13):
                    taken = trial
                    break
            previous, relative = relative, float(np.max(np.abs(p)) / max(float(np.max(np.abs(c))), 1e-300))
            if taken is None:
                break
            c = taken
            if relative < newton.step and relative >= 0.1 * previous:
                break
        if not relative < newton.step:
            return None
        return GridSolution(flow=self.flow, args=args, unknowns=c, step=relative)

    def transfer(self, solution: GridSolution, box: float) -> tuple[np.ndarray, Arguments]:
        """The solution of another grid as a start on this one with another box."""
        old = solution.flow.block
        assert isinstance(old, ChebyshevGrid)
        args = self.arguments(box)
        old_box, count = float(solution.args.box), old.points
        g = solution.unknowns * np.asarray(solution.args.scale)
        x = np.asarray(self.grid.coordinate_values(box))
        inside = np.minimum(x, old_box)
        position = 2 * inside / old_box - 1
        values = np.polynomial.chebyshev.chebval(position, g[:count])
        slope = np.polynomial.chebyshev.chebval(1.0, np.polynomial.chebyshev.chebder(g[:count])) * 2 / old_box
        d = dimension_value(self.equations)
        power = d / (d - 2) if d > 2 else 6.0
        values = values + slope * old_box / power * (np.maximum(x / old_box, 1.0) ** power - 1)
        c = np.concatenate([self.grid.coefficients_of(values), g[count:]])
        return c / np.asarray(args.scale), args


def extent(x: np.ndarray, slope: np.ndarray, unit: float) -> float:
    """The length over which a potential varies: its outermost minimum; without one, half of where the slope reaches
    STEEP (about the minimum for potentials that have one); for a flat one WITHOUT_MINIMUM natural units."""
    minimum = outermost_minimum(x, slope)
    if minimum is not None:
        return minimum
    steep = np.flatnonzero(slope > STEEP)
    return float(x[steep[0]]) / 2 if len(steep) else WITHOUT_MINIMUM * unit


def outermost_minimum(x: np.ndarray, slope: np.ndarray) -> float | None:
    """The largest x at which the slope passes from negative to positive, linearly interpolated."""
    turns = np.flatnonzero((slope[:-1] < 0) & (slope[1:] >= 0))
    if not len(turns):
        return None
    i = turns[-1]
    return float(x[i] - slope[i] * (x[i + 1] - x[i]) / (slope[i + 1] - slope[i]))


def agreeing(theta: np.ndarray, other: np.ndarray, tolerance: float) -> np.ndarray:
    """(n,) True for exponents of the first grid that the second one repeats within `tolerance` times
    max(1, |theta|), counting down from the most relevant one until the first that it does not."""
    keep = np.zeros(len(theta), dtype=bool)
    for i, value in enumerate(theta):
        near = np.min(np.abs(other - value)) if len(other) else np.inf
        keep[i] = near < tolerance * max(1.0, abs(value))
    return keep
