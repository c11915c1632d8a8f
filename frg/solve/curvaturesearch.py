"""Fixed points of functions of the curvature, order by order to high orders.

At low orders every fixed point in a stated box is found by the ladder with two free couplings. From there on the
fixed points of the order before are followed. Several genuine ones lie within about a per cent of one another, so that
Newton's iteration from one start can slip from one to the next. More starts are therefore tried: the mean
of the last eight orders along the smoothest chain, the solution eight orders before (the nearest singularity of f
lies at an angle of about 45 degrees, which repeats a pattern with this period), and small displacements of these. All that
are found are kept; which of them continues a track, and how far the next one is, is decided and stored by the
tracking of the study.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from frg.evaluate.build import build_flow, flow_arguments
from frg.evaluate.flow import Arguments, Flow
from frg.evaluate.taylor import Taylor
from frg.records import FixedPoint
from frg.solve.fixedpoint import Measured, build_record
from frg.solve.newton import BatchNewton
from frg.solve.planeladder import PlaneLadder, PlaneScan
from frg.solve.search import PolynomialSearch, Warm, distinct_rows, ranked

COMPLETE = 6  # highest order at which the box is searched for all fixed points
LOWEST = 3  # where histories begin
PERIOD = 8
FOLLOWED = 8  # fixed points of the order before that are followed
KEPT = 7  # fixed points of an order that are kept (--all keeps all)
STARTS = 16  # a compiled call
LEADING = 3
Point = dict[str, float]


@dataclass(frozen=True, kw_only=True, eq=False)
class CurvatureSearch(PolynomialSearch):
    """One running function of R expanded about R = 0, closed flow."""

    _chain: dict[int, list[Point]] = field(default_factory=dict)

    @cached_property
    def _low(self) -> tuple[Flow, Arguments, PlaneLadder]:
        flow = build_flow(self.equations, tuple(range(1, COMPLETE + 1)))
        newton = BatchNewton(flow=flow, newton=self.settings.newton, batch=64, known=1)
        return flow, flow_arguments(flow), PlaneLadder(flow=flow, newton=newton)

    @cached_property
    def _newton(self) -> BatchNewton:
        # starts are near: those that have not converged soon will not
        newton = dataclasses.replace(self.settings.newton, iterations=15, halvings=2)
        return BatchNewton(flow=self.flow, newton=newton, batch=STARTS, known=1)

    def find(self, order: int | None, warm: Warm) -> tuple[list[FixedPoint], dict[str, int], tuple[str, ...]]:
        assert order is not None
        active = self.flow.active(order)
        power = int(active.sum()) - 1
        if power <= COMPLETE:
            roots, counts, notes = self._scan(power)
        else:
            roots, counts, notes = self._follow(order, power, active, warm)
        measured = self._measured(roots, active, counts)
        return ranked([self._record(m, order) for m in measured]), counts, notes

    def _measured(self, roots: np.ndarray, active: np.ndarray, counts: dict[str, int]) -> list[Measured]:
        kept, scale = [], np.asarray(self.args.scale)
        for root in distinct_rows(roots, np.zeros((0, self.flow.size)), self.settings.duplicate):
            if np.max(np.abs(root)) < 1e-6:
                continue  # f = 0 solves the flow multiplied through by its denominators, but not the flow
            found = self.examiner.measure(root * scale, active, self.args, self.settings.polish)
            if np.isfinite(found.residual) and found.residual < self.settings.judgement.residual:
                kept.append(found)
            else:
                counts["residual too large"] = counts.get("residual too large", 0) + 1
        kept = self._distinct(kept)
        counts["fixed points"] = len(kept)
        return kept

    def _record(self, measured: Measured, order: int | None) -> FixedPoint:
        return build_record(
            self.examiner, measured, self.settings.judgement, self.args, label="", order=order,
            landmarks=newton_and_cosmological(measured.g),
        )

    # ---- low orders: everything in a box ---------------------------------------------------------

    def _scan(self, power: int) -> tuple[np.ndarray, dict[str, int], tuple[str, ...]]:
        flow, args, ladder = self._low
        scan: PlaneScan = self.settings.plane
        roots, cells = ladder.roots(flow.active(power), args, scan)
        padded = np.zeros((len(roots), self.flow.size))
        width = min(flow.size, self.flow.size)
        padded[:, :width] = roots[:, :width]
        unit = np.asarray(args.scale)
        note = (
            f"ladder in two couplings: all fixed points with |{flow.names[0]}| < {scan.first * unit[0]:.4g} and "
            f"|{flow.names[1]}| < {scan.second * unit[1]:.4g} that a grid of {scan.points} x {scan.points} resolves"
        )
        return padded, {"ladder points": scan.points**2, "starts": cells, "converged": len(roots)}, (note,)

    # ---- high orders: following ------------------------------------------------------------------

    def _follow(
        self, order: int, power: int, active: np.ndarray, warm: Warm
    ) -> tuple[np.ndarray, dict[str, int], tuple[str, ...]]:
        history = [list(step) for step in warm.earlier] if warm.order == order - 1 else []
        notes: tuple[str, ...] = ()
        if len(history) < 2:
            history = self._own_history(order)
            notes = ("reached by following the fixed points of the lower orders",)
        chain = smoothest_chain(history, self.flow.names[:LEADING])
        scale = np.asarray(self.args.scale)
        rows = [self._vector(p) / scale for p in chain[-PERIOD:]]
        centre = np.mean(rows, axis=0)
        previous = [self._vector(p) / scale for p in history[-1]]
        previous.sort(key=lambda c: float(np.max(np.abs(c - rows[-1])[:LEADING])))
        before = [self._vector(p) / scale for p in history[-PERIOD]] if len(history) >= PERIOD else []
        before.sort(key=lambda c: float(np.max(np.abs(c - centre)[:LEADING])))
        starts = [*previous[:FOLLOWED], *before[:FOLLOWED], centre]
        rng = np.random.default_rng([self.settings.stream, order])
        spread = np.max(np.abs(np.array(rows) - centre), axis=0)
        for _ in range(2 * STARTS * (4 if self.settings.rounds > 4 else 1) - len(starts)):
            starts.append(centre + spread * rng.uniform(-1.5, 1.5, len(centre)))
        batch = np.where(active, np.array(starts), 0.0)
        landing = self._newton.run(batch, active, self.args, np.zeros((0, self.flow.size)))
        good = np.isfinite(landing.unknowns).all(axis=1) & (landing.step < 1e-7)
        found = distinct_rows(landing.unknowns[good], np.zeros((0, self.flow.size)), self.settings.duplicate)
        counts = {"starts": len(batch), "converged": int(good.sum())}
        if len(found) > KEPT and self.settings.rounds <= 4:
            # far ones say nothing about the branch, and a study of many orders would mostly store their eigenvectors
            far = np.max(np.abs(found - rows[-1])[:, :LEADING], axis=1)
            counts["farther ones set aside"] = len(found) - KEPT
            found = found[np.sort(np.argsort(far)[:KEPT])]
        return found, counts, notes

    def _vector(self, point: Point) -> np.ndarray:
        return np.array([point.get(name, 0.0) for name in self.flow.names])

    def _own_history(self, order: int) -> list[list[Point]]:
        """Fixed points of the orders below, found here where a study has not found them already."""
        block = self.flow.block
        assert isinstance(block, Taylor)
        return self.history_below(block.functions[0].degree_at[order])

    def history_below(self, power: int) -> list[list[Point]]:
        """Physical fixed points with highest powers of R from `LOWEST` up to below `power`, which the flow must hold."""
        for lower in range(LOWEST, power):
            if lower not in self._chain:
                self._chain[lower] = self._points_at(lower)
        return [self._chain[k] for k in range(LOWEST, power)]

    def _points_at(self, power: int) -> list[Point]:
        degrees = self.flow.block.algebra.degrees  # type: ignore[union-attr]
        active = np.array([degrees[k] <= power for _, k in self.flow.block.layout])  # type: ignore[union-attr]
        if power <= COMPLETE:
            roots, counts, _ = self._scan(power)
        else:
            earlier = tuple(tuple(self._chain[k]) for k in range(LOWEST, power))
            roots, counts, _ = self._follow(power, power, active, Warm(earlier=earlier, order=power - 1))
        return physical_points([self._record(m, power) for m in self._measured(roots, active, counts)])


def physical_points(records: list[FixedPoint] | tuple[FixedPoint, ...]) -> list[Point]:
    """Couplings by name of the physical fixed points."""
    return [
        dict(zip(p.names, (float(c) for c in p.couplings), strict=True)) for p in records if p.kind == "physical"
    ]


def smoothest_chain(history: list[list[Point]], names: tuple[str, ...]) -> list[Point]:
    """One fixed point an order, from the last order back each time the nearest in the leading couplings: the chain with the
    least relative steps over at most the last eight orders."""
    steps = [h for h in history if h][-PERIOD:]

    def leading(p: Point) -> np.ndarray:
        return np.array([p.get(n, 0.0) for n in names])

    best: tuple[float, list[Point]] = (np.inf, [])
    for end in steps[-1]:
        chain, total = [end], 0.0
        for step in reversed(steps[:-1]):
            here = leading(chain[0])
            gaps = [_relative(leading(p), here) for p in step]
            nearest = step[int(np.argmin(gaps))]
            total += min(gaps)
            chain.insert(0, nearest)
        if total < best[0]:
            best = (total, chain)
    return best[1]


def _relative(a: np.ndarray, b: np.ndarray) -> float:
    return float(np.linalg.norm(a - b)) / max(float(np.linalg.norm(a)), float(np.linalg.norm(b)), 1e-300)


def newton_and_cosmological(g: np.ndarray) -> dict[str, float]:
    """G = -1/(16 pi f1) and Lambda = -f0/(2 f1), in units of k, from power coefficients of f."""
    if g[1] == 0:
        return {}
    return {"G": float(-1 / (16 * np.pi * g[1])), "Lambda": float(-g[0] / (2 * g[1]))}
