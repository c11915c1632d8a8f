"""Is a stored run consistent with itself? Structure and arithmetic only: no flow is derived or evaluated
here.

A run whose numbers were altered after the fact, or written by a faulty program, contradicts itself somewhere:
its checksum, signature, counts, eigenvectors or tracks no longer fit one another.
"""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from frg.errors import FrgError, Outcome, StoreError
from frg.records import FixedPoint, Run, Step, Track, Verdict
from frg.store import files, guard, reading
from frg.store.signature import signature_of

# Numbers copied from one place of the file to another are copied bit for bit; this leaves room for programs
# that recompute them in another sequence of operations.
COPY_TOLERANCE = 1e-10
# Left vectors come from an inverse, so that left^H right = 1 holds to about eps * |left| * |right|. The
# factor above eps and the floor are heuristic: far below any alteration worth making, far above round-off.
BIORTHOGONAL_FACTOR = 1e4
BIORTHOGONAL_FLOOR = 1e-8


@dataclass(frozen=True, kw_only=True)
class Check:
    """One thing that was checked. `passed` is None where the file lacks what the check needs (`detail` says
    what); `detail` names the first contradictions otherwise and is empty where all is well."""

    name: str
    passed: bool | None
    detail: str = ""


@dataclass(frozen=True, kw_only=True)
class CheckReport:
    """All checks of one file. `run` is None where it cannot be read."""

    path: str
    checks: tuple[Check, ...]
    run: Run | None

    @property
    def ok(self) -> bool:
        """No check failed."""
        return all(check.passed is not False for check in self.checks)

    @property
    def failed(self) -> tuple[Check, ...]:
        return tuple(check for check in self.checks if check.passed is False)


def check_run(path: str | os.PathLike[str]) -> CheckReport:
    """Check a run file. What is wrong with its content ends up in the report.

    Raises StoreError only where there is no HDF5 file to check: a missing file, a folder, no permission."""
    data = files.read_bytes(path)
    sealed = files.unseal(data)[1]
    wrong = {True: "", False: "does not match", None: "missing: another program wrote the file"}[sealed]
    seal = Check(name="checksum", passed=not wrong, detail=wrong)
    try:
        with guard.opened(path) as file:
            run = reading.read_run(file)
            loose = reading.uncommitted(file)
            count = guard.whole(file, "step_count")
    except StoreError as error:
        refused = Check(name="readable", passed=False, detail=error.message)
        return CheckReport(path=str(path), checks=(seal, refused), run=None)
    structure = [f"step {name} is out of sequence or not committed" for name in loose]
    if count != len(run.steps):
        structure.append(f"step_count is {count}, but {len(run.steps)} steps are committed")
    live = run.status == "running" and files.has_writer(Path(path).resolve())
    if run.status == "running" and not live:
        run = replace(run, status="interrupted")
    readable = Check(name="readable", passed=True)
    checks = (seal, readable, _check("committed steps", structure), *check_records(run))
    return CheckReport(path=str(path), checks=checks, run=run)


def check_records(run: Run) -> Iterator[Check]:
    """The checks that need only the records, for a run from any store."""
    yield _check("signature", _signature(run))
    points = [(f"step {i}, {p.label}", p) for i, s in enumerate(run.steps) for p in s.fixed_points]
    yield _check("outcomes", _outcomes(run.steps))
    yield _check("theta sorted", (f"{where}: {m}" for where, p in points for m in _sorted(p)))
    yield _check("eigenvectors", (f"{where}: {m}" for where, p in points for m in _biorthogonal(p)))
    marginal = _number(run, "marginal_tolerance")
    if marginal is None:
        yield Check(name="relevant counts", passed=None, detail="settings hold no marginal_tolerance")
    else:
        wrong = (f"{where}: {m}" for where, p in points for m in _counts(p, marginal))
        yield _check("relevant counts", wrong)
    residual = _number(run, "residual_tolerance")
    if residual is None:
        yield Check(name="residuals", passed=None, detail="settings hold no residual_tolerance")
    else:
        yield _check("residuals", (f"{where}: {m}" for where, p in points for m in _residual(p, residual)))
    yield _check("tracks", (f"track {t.label}: {m}" for t in run.tracks for m in _track(t, run.steps)))
    yield _check("verdict", () if run.verdict is None else _verdict(run.verdict, run))
    yield _check("status", _status(run))


def _signature(run: Run) -> Iterator[str]:
    try:
        expected = signature_of(run.inputs)
    except FrgError as error:
        yield str(error)
        return
    if expected != run.inputs.signature:
        yield f"stored {run.inputs.signature[:16]}, the stored inputs give {expected[:16]}"


def _outcomes(steps: Iterable[Step]) -> Iterator[str]:
    for index, step in enumerate(steps):
        if step.outcome is Outcome.FOUND and not step.fixed_points:
            yield f'step {index}: outcome "{step.outcome.word}" without a fixed point'
        if step.outcome is Outcome.NONE_FOUND and step.fixed_points:
            yield f'step {index}: outcome "{step.outcome.word}" with {len(step.fixed_points)} fixed points'
        labels = [point.label for point in step.fixed_points]
        if len(set(labels)) != len(labels):
            yield f"step {index}: two fixed points share a label"


def _sorted(point: FixedPoint) -> Iterator[str]:
    falling = point.theta.real
    if not np.isfinite(point.theta).all():
        yield "theta is not finite"
    elif np.any(np.diff(falling) > COPY_TOLERANCE * np.maximum(1.0, np.abs(falling[1:]))):
        yield "theta is not sorted by falling real part"


def _biorthogonal(point: FixedPoint) -> Iterator[str]:
    left, right = point.left, point.right
    if not (np.isfinite(left).all() and np.isfinite(right).all()):
        yield "eigenvectors are not finite"
        return
    defect = np.abs(left.conj().T @ right - np.eye(left.shape[1]))
    lengths = np.outer(np.linalg.norm(left, axis=0), np.linalg.norm(right, axis=0))
    allowed = BIORTHOGONAL_FLOOR + BIORTHOGONAL_FACTOR * np.finfo(float).eps * lengths
    if np.any(defect > allowed):
        yield f"left and right eigenvectors are not bi-orthonormal (largest defect {defect.max():.1e})"


def _counts(point: FixedPoint, tolerance: float) -> Iterator[str]:
    real = point.theta.real
    relevant = int(np.count_nonzero(real > tolerance))
    marginal = int(np.count_nonzero(np.abs(real) <= tolerance))
    if relevant != point.relevant:
        yield f"{point.relevant} relevant directions stored, theta gives {relevant}"
    if marginal != point.marginal:
        yield f"{point.marginal} marginal directions stored, theta gives {marginal}"


def _residual(point: FixedPoint, tolerance: float) -> Iterator[str]:
    if not 0 <= point.residual <= tolerance:
        yield f"residual {point.residual:.3g} is not within the tolerance {tolerance:.3g}"
    if not np.isfinite(point.couplings).all():
        yield "couplings are not finite"


def _track(track: Track, steps: tuple[Step, ...]) -> Iterator[str]:
    if np.any(np.diff(track.steps) <= 0):
        yield "its steps do not rise"
    for row, (index, number) in enumerate(zip(track.steps, track.points, strict=True)):
        if not 0 <= index < len(steps) or not 0 <= number < len(steps[index].fixed_points):
            yield f"points at fixed point {number} of step {index}, which does not exist"
            continue
        followed = track.theta[row][~np.isnan(track.theta[row])]
        if not _contained(followed, steps[index].fixed_points[number].theta):
            yield f"its exponents at step {index} are not those of the fixed point it points at"
    if np.any(track.distance < 0) or np.any(track.next_distance < 0):
        yield "a distance is negative"


def _contained(some: np.ndarray, all_of_them: np.ndarray) -> bool:
    """Whether every entry of `some` is one of `all_of_them`, each of which is used once."""
    left = list(all_of_them)
    for value in some:
        gaps = [abs(value - other) for other in left]
        if not gaps or not min(gaps) <= COPY_TOLERANCE * max(1.0, abs(value)):
            return False
        del left[int(np.argmin(gaps))]
    return True


def _verdict(verdict: Verdict, run: Run) -> Iterator[str]:
    counts = list(verdict.counts)
    if len(counts) != len(run.steps):
        yield f"{len(counts)} counts for {len(run.steps)} steps"
        return
    tracked = [track for track in run.tracks if counts == _counts_along(track, run.steps)]
    if run.tracks and not tracked:
        yield "the counts by step are those of no track"
    if not run.tracks and any(count != -1 for count in counts):
        yield "counts without a track"
    yield from _settled(verdict, run)
    lasts = np.array([exponent.last for exponent in verdict.exponents])
    if tracked and not any(_known(lasts, track) for track in tracked):
        yield "a last exponent is none of the tracked ones"
    yield from _growth(verdict)


def _counts_along(track: Track, steps: tuple[Step, ...]) -> list[int]:
    counts = [-1] * len(steps)
    for index, number in zip(track.steps, track.points, strict=True):
        if 0 <= index < len(steps) and 0 <= number < len(steps[index].fixed_points):
            counts[index] = steps[index].fixed_points[number].relevant
    return counts


def _settled(verdict: Verdict, run: Run) -> Iterator[str]:
    if (verdict.settled_from is None) != (verdict.relevant is None):
        yield "a settled count needs both the order it is settled from and the count"
        return
    if verdict.settled_from is None:
        if verdict.finite == "supported":
            yield "supported, though the count never settles"
        return
    later = [
        count
        for count, step in zip(verdict.counts, run.steps, strict=True)
        if count != -1 and min(step.order.values(), default=0) >= verdict.settled_from
    ]
    if not later:
        yield f"settled from order {verdict.settled_from}, which the tracked fixed point does not reach"
    elif set(later) != {verdict.relevant}:
        yield f"settled at {verdict.relevant} from order {verdict.settled_from}, the counts there are {later}"


def _known(lasts: np.ndarray, track: Track) -> bool:
    known = track.theta[~np.isnan(track.theta)]
    return all(np.any(np.abs(known - last) <= COPY_TOLERANCE * max(1.0, abs(last))) for last in lasts)


def _growth(verdict: Verdict) -> Iterator[str]:
    growth = verdict.growth
    if growth is None or len(growth.canonical) < 2 or np.ptp(growth.canonical) == 0:
        return
    if not (np.isfinite(growth.canonical).all() and np.isfinite(growth.entering).all()):
        yield "the entering exponents are not finite"
        return
    # The slope of the least-squares line does not depend on which sign both axes carry; its offset does.
    x = growth.canonical - growth.canonical.mean()
    slope = float(x @ growth.entering / (x @ x))
    if abs(slope - growth.slope) > 1e-6 * max(1.0, abs(slope)):
        yield f"slope {growth.slope:.6g} stored, the entering exponents give {slope:.6g}"


def _status(run: Run) -> Iterator[str]:
    if run.status == "complete" and not run.steps:
        yield "complete without a step"
    orders = run.inputs.settings.get("orders")
    if isinstance(orders, list) and orders and all(isinstance(n, int) for n in orders):
        done = [next(iter(step.order.values()), None) for step in run.steps]
        if done != orders[: len(done)]:
            yield f"the steps have orders {done}, asked for were {orders}"
        elif run.status == "complete" and len(done) != len(orders):
            yield f"complete with {len(done)} of {len(orders)} orders"


def _number(run: Run, name: str) -> float | None:
    value = run.inputs.settings.get(name)
    return float(value) if isinstance(value, (int, float)) and not isinstance(value, bool) else None


def _check(name: str, findings: Iterable[str]) -> Check:
    found = list(findings)
    more = f"; and {len(found) - 3} more" if len(found) > 3 else ""
    return Check(name=name, passed=not found, detail="; ".join(found[:3]) + more)
