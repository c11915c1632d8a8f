"""Finding all fixed points at one order: which method for which flow, duplicates, ranking."""

from __future__ import annotations

import abc
import time
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from frg.derive.equations import FlowEquations
from frg.errors import Outcome
from frg.evaluate.build import build_flow, flow_arguments, loop_rule
from frg.evaluate.fieldpolynomial import FieldPolynomial
from frg.evaluate.flow import Arguments, Flow
from frg.evaluate.taylor import Taylor
from frg.records import FixedPoint, Step
from frg.solve.fixedpoint import (
    Examiner,
    Judgement,
    Measured,
    build_record,
)
from frg.solve.functional import GridNewton
from frg.solve.ladder import Ladder, LadderScan, has_ladder
from frg.solve.newton import BatchNewton, Newton
from frg.solve.planeladder import PlaneScan
from frg.solve.shooting import ShootingScan


@dataclass(frozen=True, kw_only=True)
class SearchSettings:
    """Everything that decides what a search tries and accepts."""

    starts: int
    rounds: int
    later_rounds: int
    stream: int
    duplicate: float
    polish: int
    newton: Newton
    ladder: LadderScan
    shooting: ShootingScan
    grid: GridNewton
    plane: PlaneScan
    grid_agreement: float
    judgement: Judgement


@dataclass(frozen=True, kw_only=True, eq=False)
class Warm:
    """Fixed points of the previous step as starts, in reported unknowns by name; the physical ones of all earlier steps
    (the last is the step before, at the value `order` of the order symbol)."""

    points: tuple[dict[str, float], ...] = ()
    earlier: tuple[tuple[dict[str, float], ...], ...] = ()
    order: int | None = None


@dataclass(frozen=True, kw_only=True, eq=False)
class AbstractSearch(abc.ABC):
    """All fixed points of one flow at one order of the study."""

    @abc.abstractmethod
    def find(self, order: int | None, warm: Warm) -> tuple[list[FixedPoint], dict[str, int], tuple[str, ...]]:
        """(records sorted by `ranking`, counts of what was tried, notes)."""


def run_step(search: AbstractSearch, name: str, order: int | None, warm: Warm) -> Step:
    """One step of a study; failures are recorded in its outcome, never raised."""
    begun = time.perf_counter()
    points, counts, notes = search.find(order, warm)
    interacting = [p for p in points if p.kind != "gaussian"]
    outcome = Outcome.FOUND if points else Outcome.NONE_FOUND
    if points and not interacting:
        notes = (*notes, "only the Gaussian fixed point was found at this order")
    return Step(
        order={name: order} if order is not None else {}, outcome=outcome, fixed_points=tuple(points),
        search=counts, seconds=time.perf_counter() - begun, notes=notes,
    )


@dataclass(frozen=True, kw_only=True, eq=False)
class PolynomialSearch(AbstractSearch):
    """Expansions in couplings: the ladder where there is one, multistart Newton with deflation otherwise."""

    equations: FlowEquations
    orders: tuple[int, ...]
    settings: SearchSettings
    _memory: dict[str, np.ndarray] = field(default_factory=dict)

    @cached_property
    def flow(self) -> Flow:
        return build_flow(self.equations, self.orders)

    @cached_property
    def args(self) -> Arguments:
        return flow_arguments(self.flow)

    @cached_property
    def examiner(self) -> Examiner:
        rule = loop_rule(self.equations)
        return Examiner(flow=self.flow, lowest=rule.lowest if rule else lowest_of(self.equations))

    @cached_property
    def _newton(self) -> BatchNewton:
        settings = self.settings
        return BatchNewton(flow=self.flow, newton=settings.newton, batch=settings.starts, known=96)

    @cached_property
    def _ladder(self) -> Ladder:
        return Ladder(flow=self.flow)

    def find(self, order: int | None, warm: Warm) -> tuple[list[FixedPoint], dict[str, int], tuple[str, ...]]:
        active = self.flow.active(order)
        if has_ladder(self.flow):
            roots, counts, notes = self._climb(active)
        else:
            roots, counts, notes = self._multistart(active, order, warm)
        measured = []
        for root in roots:
            found = self.examiner.measure(root * np.asarray(self.args.scale), active, self.args, self.settings.polish)
            if np.isfinite(found.residual) and found.residual < self.settings.judgement.residual:
                measured.append(found)
            else:
                counts["residual too large"] = counts.get("residual too large", 0) + 1
        measured = self._distinct(measured)
        counts["fixed points"] = len(measured)
        records = [self._record(m, order) for m in measured]
        return ranked(records), counts, notes

    def _record(self, measured: Measured, order: int | None) -> FixedPoint:
        return build_record(
            self.examiner, measured, self.settings.judgement, self.args, label="", order=order
        )

    # ---- ladder ------------------------------------------------------------------------------

    def _climb(self, active: np.ndarray) -> tuple[np.ndarray, dict[str, int], tuple[str, ...]]:
        scan = self.settings.ladder
        unit = float(np.asarray(self.args.scale)[0])
        region = LadderScan(
            low=-0.9995 * self.examiner.lowest / unit, high=scan.high / unit,
            points=scan.points, halvings=scan.halvings,
        )
        last = int(active.sum())
        roots = self._ladder.roots(last, self.args, region)
        kept = roots[self._ladder.genuine(roots[:, 0], last, self.args)] if len(roots) else roots
        noise = len(roots) - len(kept)
        if self._vanishes(active):
            kept = np.concatenate([np.zeros((1, self.flow.size)), kept])
        counts = {"ladder points": scan.points, "brackets": len(roots), "rounding noise": noise}
        notes = (
            f"ladder: all real roots with {region.low * unit:.4g} < first coupling < {scan.high:.4g} "
            "that the scan resolves",
        )
        return kept, counts, notes

    # ---- multistart --------------------------------------------------------------------------

    def _multistart(
        self, active: np.ndarray, order: int | None, warm: Warm
    ) -> tuple[np.ndarray, dict[str, int], tuple[str, ...]]:
        settings = self.settings
        args = self._fitted(warm)
        scale = np.asarray(args.scale)
        rng = np.random.default_rng([settings.stream, order or 0])
        starts = [np.where(active, self._unknowns(point) / scale, 0.0) for point in warm.points]
        warm_starts = np.array(starts).reshape(-1, self.flow.size)
        counts = {"starts": 0, "converged": 0}
        roots = np.zeros((0, self.flow.size))
        if not self._moving:
            roots = np.zeros((1, self.flow.size)) if self._vanishes(active) else roots
        # a study needs few fresh starts once it has the roots of the previous order
        rounds = settings.later_rounds if len(warm_starts) else settings.rounds
        for turn in range(rounds):
            cold = self._random(rng, settings.starts, active)
            batch = np.concatenate([warm_starts, cold]) if turn == 0 else cold
            landing = self._newton.run(batch, active, args, roots)
            good = np.isfinite(landing.unknowns).all(axis=1) & (landing.step < 1e-7)
            counts["starts"] += len(batch)
            counts["converged"] += int(good.sum())
            new = distinct_rows(landing.unknowns[good], roots, settings.duplicate)
            roots = np.concatenate([roots, new])
        return roots * scale / np.asarray(self.args.scale), counts, ()

    def _unknowns(self, point: dict[str, float]) -> np.ndarray:
        """Reported unknowns by name as a padded vector."""
        return np.array([point.get(name, 0.0) for name in self.flow.names])

    def _fitted(self, warm: Warm) -> Arguments:
        """Units in which the Taylor coefficients of the first known root stay of order one."""
        if not warm.points or not isinstance(self.flow.block, Taylor):
            return self.args
        scale = self.examiner.fitting_scale(self._unknowns(warm.points[0]), np.asarray(self.args.scale))
        return self.args._replace(scale=np.asarray(scale))

    @property
    def _moving(self) -> bool:
        return isinstance(self.flow.block, Taylor) and self.flow.block.moving

    def _vanishes(self, active: np.ndarray) -> bool:
        """True where vanishing couplings are a fixed point (no search finds it better)."""
        import jax

        value = np.asarray(jax.jit(self.flow.residual)(np.zeros(self.flow.size), active, self.args))
        return bool(np.isfinite(value).all() and np.max(np.abs(value)) < 1e-12)

    def _random(self, rng: np.random.Generator, count: int, active: np.ndarray) -> np.ndarray:
        """Starts with random signs and logarithmic sizes that fall with the power of the coordinate."""
        size = self.flow.size
        # couplings without a natural unit can be small: a fixed point of order epsilon near a critical dimension
        least = -2.0 if self.flow.block is not None else -4.0
        magnitude = 10.0 ** rng.uniform(least, 0.5, (count, size)) * 0.7 ** self._powers
        starts = rng.choice([-1.0, 1.0], (count, size)) * magnitude
        for position in self._positive:
            starts[:, position] = 10.0 ** rng.uniform(-1.3, 0.6, count)
        return np.where(active, starts, 0.0)

    @cached_property
    def _powers(self) -> np.ndarray:
        block, powers = self.flow.block, np.zeros(self.flow.size)
        if isinstance(block, Taylor):
            powers[: block.size] = [block.algebra.degrees[k] for _, k in block.layout]
        elif isinstance(block, FieldPolynomial):
            powers[: block.size] = np.array(block.field_degree) / 2
        return powers

    @cached_property
    def _positive(self) -> list[int]:
        found = [self.flow.names.index("minimum{}")] if self.flow.minimum_function else []
        if self._moving:
            found.append(self.flow.block.layout.index((0, 1)))  # type: ignore[union-attr]
        return found

    def _distinct(self, measured: list[Measured]) -> list[Measured]:
        """Polished roots that differ, those with the smallest residual first; degenerate ones (a running minimum
        of a constant potential) dropped."""
        kept: list[Measured] = []
        scale = np.asarray(self.args.scale)
        for m in sorted(measured, key=lambda m: m.residual):
            c = m.g / scale
            if self._moving and np.max(np.abs(np.delete(c, self._positive))) < 1e-9:
                continue
            if not any(self._same(c, k.g / scale) for k in kept):
                kept.append(m)
        return kept

    def _same(self, a: np.ndarray, b: np.ndarray) -> bool:
        """Equal to the relative tolerance for duplicates, or both zero to that of the Gaussian fixed point."""
        size = max(float(np.max(np.abs(a))), 1e-12)
        zero = max(size, float(np.max(np.abs(b)))) < self.settings.judgement.gaussian
        return zero or bool(np.max(np.abs(a - b)) <= self.settings.duplicate * size)


def distinct_rows(rows: np.ndarray, known: np.ndarray, tolerance: float) -> np.ndarray:
    """Rows that differ from the known ones and from one another by more than `tolerance`, relative to their size."""
    new: list[np.ndarray] = []
    for row in rows:
        size = max(float(np.max(np.abs(row))), 1e-12)
        if all(np.max(np.abs(row - other)) > tolerance * size for other in [*known, *new]):
            new.append(row)
    return np.array(new).reshape(-1, rows.shape[1])


KINDS = ("gaussian", "physical", "spurious")


def ranked(records: list[FixedPoint]) -> list[FixedPoint]:
    """Gaussian first, then physical ones by the number of relevant directions, then spurious ones;
    labelled A, B, C, ... in that order."""
    import dataclasses

    records = [dataclasses.replace(p, notes=(*p.notes, *_degeneracies(p))) for p in records]

    def key(point: FixedPoint) -> tuple[float, ...]:
        lead = float(point.theta[0].real) if len(point.theta) else 0.0
        return (KINDS.index(point.kind), point.relevant, lead, float(np.sum(np.abs(point.couplings[:1]))))

    labelled = [
        dataclasses.replace(point, label=letters(i)) for i, point in enumerate(sorted(records, key=key))
    ]
    return [dataclasses.replace(p, notes=(*p.notes, *_twins(p, labelled[:i]))) for i, p in enumerate(labelled)]


def _degeneracies(point: FixedPoint) -> tuple[str, ...]:
    """A note naming real exponents that occur more than once."""
    left = [float(t.real) for t in point.theta if abs(t.imag) < 1e-9]
    found = []
    while left:
        value = left.pop(0)
        same = [v for v in left if abs(v - value) < DEGENERATE * max(1.0, abs(value))]
        left = [v for v in left if v not in same]
        if same:
            found.append(f"{value:.6g} ({len(same) + 1} times)")
    return (f"degenerate exponents: {', '.join(found)}",) if found else ()


def _twins(point: FixedPoint, earlier: list[FixedPoint]) -> tuple[str, ...]:
    """A note naming earlier fixed points with the same exponents: images under a symmetry of the couplings."""
    for other in earlier:
        if len(other.theta) == len(point.theta) and np.allclose(
            other.theta, point.theta, rtol=DEGENERATE, atol=DEGENERATE
        ):
            return (f"same exponents as {other.label}: an image of it under a symmetry of the couplings",)
    return ()


DEGENERATE = 1e-7


def letters(index: int) -> str:
    """A, B, ..., Z, AA, AB, ..."""
    name = ""
    index += 1
    while index:
        index, rest = divmod(index - 1, 26)
        name = chr(ord("A") + rest) + name
    return name


def lowest_of(equations: FlowEquations) -> float:
    """min P of a regulator whose loops are all in closed form: 1 for the flat shape at alpha = 1 and for
    the sharp cutoff, where the mode at y = 1 is integrated out."""
    return 1.0
