"""Following fixed points, and the directions at them, from step to step of a study."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from frg.records import FixedPoint, Step, Track

LEADING = 3  # couplings and exponents that decide the distance of two fixed points
WINDOWS = (1, 2, 8)  # steps averaged: sequences that converge fast need few, those that oscillate about a limit many
TRIED = 4  # predictions after which a predictor can be preferred

RULE = (
    f"least sum of squared distances: the first {LEADING} couplings and exponents of a root are compared, each relative to "
    f"its size (couplings: the largest over the last {WINDOWS[-1]} steps, for they may pass through zero), with what is "
    f"expected of the track: its last step, its mean over the last {WINDOWS[1]} or {WINDOWS[2]} steps, or its step "
    f"{WINDOWS[-1]} before, whichever has been nearest so far. Of all chains of roots the one with the least sum of squared "
    "distances is a track, a step without root counting as `reach`, beyond which no link is made; then the next "
    "among the roots that are left"
)


@dataclass(frozen=True, kw_only=True)
class TrackingSettings:
    """`reach` is the largest distance at which a root continues a track; `shortest` the least number of steps
    of a track that is kept; `most` the number of tracks kept."""

    reach: float
    shortest: int
    most: int


@dataclass(frozen=True, eq=False)
class _Path:
    """A chain of roots and what it cost; `missed` (links, predictors) says how far each predictor was from the root."""

    steps: tuple[int, ...]
    points: tuple[int, ...]
    distance: tuple[float, ...]
    next_distance: tuple[float, ...]
    missed: tuple[np.ndarray, ...]
    cost: float


def fingerprint(point: FixedPoint) -> np.ndarray:
    """(2 * LEADING,) complex: leading couplings, then leading exponents; NaN where there are fewer."""
    found = np.full(2 * LEADING, np.nan, dtype=complex)
    couplings, theta = point.couplings[:LEADING], point.theta[:LEADING]
    found[: len(couplings)] = couplings
    found[LEADING : LEADING + len(theta)] = theta.real + 1j * np.abs(theta.imag)
    return found


def distances(points: np.ndarray, predictions: np.ndarray, size: np.ndarray | float = 0.0) -> np.ndarray:
    """(p, m) root mean square of relative differences of fingerprints (m, 2 LEADING) from others (p, 2 LEADING), over the
    entries both have; `size` is the least that a difference is related to, entry by entry."""
    predictions = predictions[:, None]
    both = ~(np.isnan(points) | np.isnan(predictions))
    size = np.maximum(np.maximum(np.abs(points), np.abs(predictions)), np.maximum(size, 1e-300))
    gaps = np.abs(np.where(both, points - predictions, 0.0) / np.where(both, size, 1.0)) ** 2
    count = both.sum(axis=-1)
    return np.where(count > 0, np.sqrt(gaps.sum(axis=-1) / np.maximum(count, 1)), np.inf)


def track_points(steps: tuple[Step, ...], settings: TrackingSettings) -> tuple[Track, ...]:
    """Tracks of all interacting fixed points, best first: those that reach the last step, physical ones before others, then by
    cost, which favours tracks that cover many steps (a fixed point is to survive when the truncation grows) smoothly."""
    prints = [np.array([fingerprint(p) for p in step.fixed_points]).reshape(-1, 2 * LEADING) for step in steps]
    free = [{i for i, p in enumerate(step.fixed_points) if p.kind != "gaussian"} for step in steps]
    paths: list[_Path] = []
    while len(paths) < settings.most and (path := _best_chain(steps, prints, free, settings.reach)) is not None:
        paths.append(path)
        for s, i in zip(path.steps, path.points, strict=True):
            free[s].discard(i)
    last = len(steps) - 1

    def quality(path: _Path) -> tuple[bool, bool, float]:
        end = steps[path.steps[-1]].fixed_points[path.points[-1]]
        return (path.steps[-1] != last, end.kind != "physical", path.cost)

    long = [p for p in paths if len(p.steps) >= min(settings.shortest, len(steps))]
    return tuple(_track(f"track {i + 1}", path, steps) for i, path in enumerate(sorted(long, key=quality)))


def _best_chain(
    steps: tuple[Step, ...], prints: list[np.ndarray], free: list[set[int]], reach: float
) -> _Path | None:
    """The chain of free roots with the least cost, steps before its first and after its last root included; by
    keeping, for every root, the best chain that ends there. A chain starts at a physical root and may miss one step
    at a time."""
    ending: list[dict[int, _Path]] = []
    best: _Path | None = None
    for s, step in enumerate(steps):
        found: dict[int, _Path] = {
            i: _Path((s,), (i,), (np.nan,), (np.inf,), (), s * reach**2)
            for i in free[s] if step.fixed_points[i].kind == "physical"
        }
        for back in (1, 2):
            for path in ending[s - back].values() if s >= back else ():
                _extend(path, s, prints, free[s], found, reach, (back - 1) * reach**2)
        ending.append(found)
        for path in found.values():
            total = path.cost + (len(steps) - 1 - s) * reach**2
            if best is None or total < best.cost + (len(steps) - 1 - best.steps[-1]) * reach**2:
                best = path
    return best


def _extend(
    path: _Path, s: int, prints: list[np.ndarray], free: set[int], found: dict[int, _Path], reach: float, penalty: float
) -> None:
    """Put the path, extended to step s, in `found` wherever it is cheaper than what stands there."""
    if not free:
        return
    predictors, size = _expected(path, prints)
    table = distances(prints[s], predictors, size)
    gaps = table[_most_successful(path.missed)]
    for i in free:
        cost = path.cost + penalty + float(gaps[i]) ** 2
        if gaps[i] > reach or (i in found and found[i].cost <= cost):
            continue
        others = np.delete(gaps, i)
        found[i] = _Path(
            (*path.steps, s), (*path.points, i), (*path.distance, float(gaps[i])),
            (*path.next_distance, float(np.min(others, initial=np.inf))), (*path.missed, table[:, i]), cost,
        )


def _expected(path: _Path, prints: list[np.ndarray]) -> tuple[np.ndarray, np.ndarray]:
    """(fingerprints that the predictors expect of the next step, least sizes of their entries)."""
    recent = slice(-WINDOWS[-1], None)
    taken = np.array([prints[s][i] for s, i in zip(path.steps[recent], path.points[recent], strict=True)])
    size = np.zeros(2 * LEADING)
    size[:LEADING] = np.max(np.abs(np.nan_to_num(taken[:, :LEADING])), axis=0)
    return np.array(_predictors(path.steps[recent], taken)), size


def _most_successful(missed: tuple[np.ndarray, ...]) -> int:
    """The predictor with the least mean error lately, among those that have been tried often enough."""
    if not missed:
        return 0
    recent = np.array(missed[-WINDOWS[-1] :])
    tried = np.isfinite(recent).sum(axis=0)
    total = np.where(np.isfinite(recent), recent, 0.0).sum(axis=0)
    return int(np.argmin(np.where(tried >= min(len(recent), TRIED), total / np.maximum(tried, 1), np.inf)))


def _predictors(steps: tuple[int, ...], taken: np.ndarray) -> list[np.ndarray]:
    """Mean fingerprints over the last steps, one for every window (an entry that the oldest steps lack is averaged
    over the others), and the fingerprint as many steps before as the longest window has (a sequence that oscillates
    with that period)."""
    found = []
    for window in WINDOWS:
        recent = taken[-window:]
        known = ~np.isnan(recent)
        total = np.where(known, recent, 0.0).sum(axis=0)
        found.append(np.where(known.any(axis=0), total / np.maximum(known.sum(axis=0), 1), np.nan))
    before = [i for i, s in enumerate(steps) if s == steps[-1] + 1 - WINDOWS[-1]]
    found.append(taken[before[0]] if before else np.full(taken.shape[1], np.nan))
    return found


def _track(label: str, path: _Path, steps: tuple[Step, ...]) -> Track:
    points = [steps[s].fixed_points[i] for s, i in zip(path.steps, path.points, strict=True)]
    missing = sorted(set(range(path.steps[0], path.steps[-1] + 1)) - set(path.steps))
    notes = tuple(f"not found at step {s} ({_order_text(steps[s])})" for s in missing)
    return Track(
        label=label, rule=RULE, steps=np.array(path.steps), points=np.array(path.points),
        theta=track_directions(points), distance=np.array(path.distance),
        next_distance=np.array(path.next_distance), notes=notes,
    )


def _order_text(step: Step) -> str:
    return ", ".join(f"{k} = {v}" for k, v in step.order.items())


def track_directions(points: list[FixedPoint]) -> np.ndarray:
    """(k, m) exponents by followed direction. Directions of neighbouring steps are paired by the overlap of left
    with right eigenvectors on common couplings together with the relative change of the exponent."""
    from scipy.optimize import linear_sum_assignment

    width = max((len(p.theta) for p in points), default=0)
    slots = list(range(len(points[0].theta))) if points else []
    table = np.full((len(points), width + sum(len(p.theta) for p in points)), np.nan, dtype=complex)
    used = len(slots)
    for k, point in enumerate(points):
        if k > 0:
            cost = _direction_cost(points[k - 1], point)
            rows, chosen = linear_sum_assignment(cost)
            new_slots = [-1] * len(point.theta)
            for r, c in zip(rows, chosen, strict=True):
                new_slots[c] = slots[r]
            for c in range(len(new_slots)):
                if new_slots[c] < 0:
                    new_slots[c] = used
                    used += 1
            slots = new_slots
        table[k, slots] = point.theta
    table = table[:, :used]
    # columns by falling real part at the last step; directions that ended earlier come last
    final = table[-1] if len(points) else np.zeros(0)
    alive = np.isfinite(final)
    order = np.lexsort((-np.nan_to_num(final.imag), -np.round(np.nan_to_num(final.real), 9), ~alive))
    return table[:, order]


def _direction_cost(before: FixedPoint, after: FixedPoint) -> np.ndarray:
    common = [n for n in before.names if n in after.names]
    left = before.left[[before.names.index(n) for n in common]]
    right = after.right[[after.names.index(n) for n in common]]
    overlap = np.abs(left.conj().T @ right)
    overlap = overlap / np.maximum(np.max(overlap, axis=1, keepdims=True), 1e-300)
    change = np.abs(before.theta[:, None] - after.theta[None, :])
    return change / (1 + np.abs(before.theta[:, None])) + 0.5 * (1 - np.nan_to_num(overlap))
