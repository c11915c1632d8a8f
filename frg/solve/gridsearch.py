"""Search for global fixed points on a Chebyshev grid."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from frg.derive.equations import FlowEquations
from frg.errors import NotYet, Place
from frg.evaluate.build import dimension_value, flow_arguments, loop_rule
from frg.evaluate.grid import ChebyshevGrid
from frg.evaluate.jaxload import load
from frg.records import FixedPoint
from frg.solve.fixedpoint import Examiner, Measured, build_record
from frg.solve.functional import GridProblem, GridSolution, agreeing, extent
from frg.solve.search import AbstractSearch, SearchSettings, Warm, lowest_of, ranked
from frg.solve.shooting import Shooting, Shot, can_shoot, companion

COARSE = 1e-4  # accuracy of loop integrals in the shooting scan
ROUGH = 1e-6  # last relative to first Chebyshev coefficients of a solution that is not smooth
COARSE_POINTS = 24  # of the grid that smoothes a start
MORE_POINTS = 12  # of the second grid that cleans the spectrum
WIDER_BOXES = (1.25, 1.15, 1.1)  # of the second grid, against the box of the first
SMOOTH = 1e-13  # the same for a solution resolved to round-off
MOST_BRACKETS = 48  # of the shooting scan; more sign changes than this mean that the scan is not reliable


@dataclass(frozen=True, kw_only=True, eq=False)
class GridSearch(AbstractSearch):
    """Shooting gives the candidates; every one is solved on the grid and again on a finer grid over a wider
    box. What does not survive that is not a global fixed point."""

    equations: FlowEquations
    settings: SearchSettings

    @cached_property
    def problem(self) -> GridProblem:
        if not can_shoot(self.equations):
            raise NotYet(
                "a grid for several functions, for couplings beside a function, or for flows with more than "
                "two derivatives",
                remedy="use an expansion about a number or about the minimum",
                place=Place(source=self.equations.truncation.source),
            )
        return GridProblem(equations=self.equations, points=self._declared.points)

    @property
    def _declared(self):  # type: ignore[no-untyped-def]
        return self.equations.functions[0].declared.grid

    @cached_property
    def coarse(self) -> GridProblem:
        return GridProblem(equations=self.equations, points=min(COARSE_POINTS, self._declared.points))

    @cached_property
    def second(self) -> GridProblem:
        return GridProblem(equations=self.equations, points=self._declared.points + MORE_POINTS)

    @cached_property
    def lowest(self) -> float:
        rule = loop_rule(self.equations)
        return rule.lowest if rule else lowest_of(self.equations)

    @cached_property
    def examiner(self) -> Examiner:
        return Examiner(flow=self.problem.flow, lowest=self.lowest)

    @cached_property
    def second_examiner(self) -> Examiner:
        return Examiner(flow=self.second.flow, lowest=self.lowest)

    def find(self, order: int | None, warm: Warm) -> tuple[list[FixedPoint], dict[str, int], tuple[str, ...]]:
        counts = {"candidates": 0, "converged": 0, "lost in a wider box": 0}
        notes: list[str] = []
        kept: list[tuple[GridSolution, FixedPoint]] = []
        for shot in self._candidates(notes):
            counts["candidates"] += 1
            self._try(shot, kept, counts)
        if not any(record.kind == "physical" for _, record in kept):
            notes.append("shooting found no interacting fixed point; simple potentials were tried as starts")
            for shot in self._simple():
                counts["candidates"] += 1
                self._try(shot, kept, counts)
        counts["fixed points"] = len(kept)
        return ranked([record for _, record in kept]), counts, tuple(notes)

    # ---- candidates --------------------------------------------------------------------------

    def _candidates(self, notes: list[str]) -> list[Shot]:
        shooting = Shooting(equations=companion(self.equations))
        # candidates only: a coarse rule is enough, and the scan costs in proportion to its nodes
        args = flow_arguments(shooting.flow, accuracy=COARSE)
        shots, dropped = shooting.scan(self.settings.shooting, args, self.lowest, MOST_BRACKETS)
        if dropped:
            notes.append(f"{dropped} sign changes of the shooting scan were not followed")
        return [self._constant(), *(s for s in shots if len(s.x) > 20)]

    def _unit(self) -> float:
        return self.problem.unit

    def _constant(self) -> Shot:
        """The Gaussian fixed point: the constant potential at which -d U balances the loops."""
        flow = self.problem.flow
        args = self.problem.arguments(self._unit())
        vacuum = float(np.asarray(flow.right_side(np.zeros(flow.size), args))[0])
        x = np.linspace(0.1, 6.0, 60) * self._unit()
        return Shot(sigma=0.0, x=x, u=np.full(60, vacuum / dimension_value(self.equations)), slope=np.zeros(60))

    def _simple(self) -> list[Shot]:
        """Polynomial potentials with a few minima (natural units): quartic ones with several curvatures, and sextic
        ones, u' = sigma (1 - (x/minimum)^2), down to the edge of the domain sigma = -min P."""
        unit = self._unit()
        x = np.linspace(0.02, 8.0, 400) * unit
        quartic = [
            Shot(sigma=-curve * minimum, x=x, u=curve / unit * (x - minimum * unit) ** 2 / 2,
                 slope=curve / unit * (x - minimum * unit))
            for minimum in (0.0, 0.25, 0.5, 1.0, 2.0) for curve in (0.03, 0.1, 0.3, 1.0)
        ]
        sextic = [
            Shot(sigma=sigma, x=x, u=sigma * (x - x**3 / (3 * (minimum * unit) ** 2)),
                 slope=sigma * (1 - (x / (minimum * unit)) ** 2))
            for minimum in (1.0, 1.5, 2.0, 2.5, 3.0) for sigma in (-0.3 * self.lowest, -self.lowest)
        ]
        return [*quartic, *sextic]

    # ---- one candidate ------------------------------------------------------------------------

    def _try(
        self, shot: Shot, kept: list[tuple[GridSolution, FixedPoint]], counts: dict[str, int]
    ) -> None:
        solution = self._smoothest(shot)
        if solution is None:
            return
        counts["converged"] += 1
        if any(self._same(solution, other) for other, _ in kept):
            return
        again = self._again(solution)
        if again is None:
            counts["lost in a wider box"] += 1
            return
        record = self._record(solution, again)
        if not record.residual < self.settings.judgement.residual:
            counts["residual too large"] = counts.get("residual too large", 0) + 1
            return
        kept.append((solution, record))

    def _smoothest(self, shot: Shot) -> GridSolution | None:
        """The solution on the grid, started from the shot and from the shot's solution on a coarse grid: a set of nodes
        also admits rough solutions close to the smooth one, which betray themselves by their last coefficients."""
        newton, upto = self.settings.grid, self._declared.upto
        found = [self.problem.solve(*self.problem.start(shot, upto), newton)]
        rough = self.coarse.solve(*self.coarse.start(shot, upto), newton)
        if rough is not None:
            found.append(self.problem.solve(*self.problem.transfer(rough, float(rough.args.box)), newton))
        solutions = [s for s in found if s is not None]
        return self._boxed(min(solutions, key=tail)) if solutions else None

    def _again(self, solution: GridSolution) -> GridSolution | None:
        """The solution on the second grid over a wider box, directly or by way of the coarse grid; the smoothest."""
        newton, found = self.settings.grid, []
        for wider in WIDER_BOXES:
            box = wider * float(solution.args.box)
            starts = [solution, self.coarse.solve(*self.coarse.transfer(solution, box), newton)]
            for start in starts:
                if start is None:
                    continue
                again = self.second.solve(*self.second.transfer(start, box), newton)
                if again is None or not self._same(solution, again):
                    continue
                if tail(again) < SMOOTH:
                    return again
                found.append(again)
        return min(found, key=tail) if found else None

    def _extent(self, solution: GridSolution) -> float:
        g, block = solution.unknowns * np.asarray(solution.args.scale), solution.flow.block
        assert isinstance(block, ChebyshevGrid)
        x = np.linspace(0.0, float(solution.args.box), 601)
        slope = np.polynomial.chebyshev.chebval(
            2 * x / float(solution.args.box) - 1, block.differentiation @ g[: block.points]
        )
        return extent(x, slope * 2 / float(solution.args.box), self._unit())

    def _boxed(self, solution: GridSolution) -> GridSolution:
        """The solution on the box that belongs to its own extent, which may not be the start's."""
        box = self._declared.upto * self._extent(solution)
        if abs(box / float(solution.args.box) - 1) < 0.02:
            return solution
        moved = self.problem.solve(*self.problem.transfer(solution, box), self.settings.grid)
        return moved if moved is not None and tail(moved) < ROUGH else solution

    def _slopes(self, solution: GridSolution) -> np.ndarray:
        """u' at a few points inside the smaller box: what tells solutions apart."""
        box = float(solution.args.box)
        g = solution.unknowns * np.asarray(solution.args.scale)
        block, name = solution.flow.block, self.equations.functions[0].name
        x = load().numpy.asarray(np.array([0.0, 0.15, 0.3, 0.45]) * self._reference_box(solution))
        return np.asarray([block.jets_at(g[: block.size], one, name, (1,), box) for one in x])  # type: ignore[union-attr]

    def _reference_box(self, solution: GridSolution) -> float:
        return self._unit()

    def _same(self, a: GridSolution, b: GridSolution) -> bool:
        first, second = self._slopes(a), self._slopes(b)
        size = max(np.max(np.abs(first)), np.max(np.abs(second)))
        return bool(np.max(np.abs(first - second)) < 1e-4 * size + 1e-6)

    def _measure(self, examiner: Examiner, solution: GridSolution) -> Measured:
        g = solution.unknowns * np.asarray(solution.args.scale)
        active = np.ones(len(g), dtype=bool)
        return examiner.measure(g, active, solution.args, self.settings.polish)

    def _record(self, solution: GridSolution, again: GridSolution) -> FixedPoint:
        judgement = self.settings.judgement
        measured = self._measure(self.examiner, solution)
        other = self._measure(self.second_examiner, again)
        tolerance = self.settings.grid_agreement
        theta, second = measured.spectrum.theta, other.spectrum.theta
        keep = agreeing(theta, second, tolerance) & ~self._constant_direction(measured)
        keep &= theta.real < dimension_value(self.equations) + 1e-6
        keep = _leading(keep, theta, dimension_value(self.equations))
        odd = self.examiner.odd_exponents(measured.g, None, solution.args, self._unit())
        odd_again = self.second_examiner.odd_exponents(other.g, None, again.args, self._unit())
        odd = odd[agreeing(odd, odd_again, tolerance)]
        error = np.array([np.min(np.abs(second - t)) for t in theta[keep]])
        notes = [f"box and resolution error of theta, by direction: {', '.join(f'{e:.1e}' for e in error[:6])}"]
        return build_record(
            self.examiner, measured, judgement, solution.args, label="", order=None, keep=keep, odd=odd,
            notes=tuple(notes), landmarks=self._landmarks(solution, measured),
        )

    def _constant_direction(self, measured: Measured) -> np.ndarray:
        """(k,) True for the eigenvector that only shifts the potential by a constant (theta = d)."""
        vectors = np.abs(measured.spectrum.right / np.linalg.norm(measured.spectrum.right, axis=0))
        return vectors[0] > 1 - 1e-6

    def _landmarks(self, solution: GridSolution, measured: Measured) -> dict[str, float]:
        block, args, name = solution.flow.block, solution.args, self.equations.functions[0].name
        own = measured.g[: block.size]  # type: ignore[union-attr]
        at_zero = float(block.jets_at(own, load().numpy.zeros(()), name, (1,), args.box))  # type: ignore[union-attr]
        found = {"box": float(args.box), f"{name}1 at zero": at_zero}
        minimum = refined_minimum(solution, measured.g, name)
        if minimum is not None:
            found[f"{name}_min"] = minimum
            if solution.flow.minimum_function:
                found["minimum for eta"] = float(measured.g[-1])
        return found


def tail(solution: GridSolution) -> float:
    """Size of the last Chebyshev coefficients relative to the largest non-constant one."""
    block = solution.flow.block
    assert isinstance(block, ChebyshevGrid)
    c = np.abs(solution.unknowns[: block.points])
    return float(np.max(c[-4:]) / max(float(np.max(c[1:])), 1e-300))


def refined_minimum(solution: GridSolution, g: np.ndarray, name: str) -> float | None:
    """Position of the outermost minimum of the potential on a grid, or None."""
    from scipy.optimize import brentq

    block, args = solution.flow.block, solution.args
    own = g[: block.size]  # type: ignore[union-attr]

    def slope(x: float) -> float:
        return float(block.jets_at(own, load().numpy.asarray(x), name, (1,), args.box))  # type: ignore[union-attr]

    x = np.linspace(0.0, float(args.box), 121)
    values = np.array([slope(v) for v in x])
    turns = np.flatnonzero((values[:-1] < 0) & (values[1:] >= 0))
    return float(brentq(slope, x[turns[-1]], x[turns[-1] + 1], xtol=1e-15)) if len(turns) else None


def _leading(keep: np.ndarray, theta: np.ndarray, d: float) -> np.ndarray:
    """Keep directions only as far down as the two grids agree without a gap, artefacts above d aside."""
    found = keep.copy()
    broken = False
    for i, value in enumerate(theta):
        if value.real > d - 1e-6:
            continue
        if not keep[i]:
            broken = True
        found[i] = keep[i] and not broken
    return found


