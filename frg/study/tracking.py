"""Following fixed points, and the directions at them, from step to step of a study."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from frg.records import FixedPoint, Step, Track

LEADING = 3  # couplings and exponents that decide the distance of two fixed points

RULE = (
    f"nearest root: the first {LEADING} couplings and exponents of a root are compared, each relative to its size, with "
    "their mean over the last two steps of the track (the last step alone at first); pairs are taken in the order "
    "of their distance, a root serves one track, and a track ends when nothing is nearer than `reach`"
)


@dataclass(frozen=True, kw_only=True)
class TrackingSettings:
    """`reach` is the largest distance at which a root continues a track; `shortest` the least number of steps
    of a track that is kept; `most` the number of tracks kept."""

    reach: float
    shortest: int
    most: int


@dataclass(eq=False)
class _Path:
    steps: list[int] = field(default_factory=list)
    points: list[int] = field(default_factory=list)
    distance: list[float] = field(default_factory=list)
    next_distance: list[float] = field(default_factory=list)


def fingerprint(point: FixedPoint) -> np.ndarray:
    """(2 * LEADING,) complex: leading couplings, then leading exponents; NaN where there are fewer."""
    found = np.full(2 * LEADING, np.nan, dtype=complex)
    couplings, theta = point.couplings[:LEADING], point.theta[:LEADING]
    found[: len(couplings)] = couplings
    found[LEADING : LEADING + len(theta)] = theta.real + 1j * np.abs(theta.imag)
    return found


def distance(point: np.ndarray, prediction: np.ndarray) -> float:
    """Root mean square of relative differences over the entries both fingerprints have."""
    both = ~(np.isnan(point) | np.isnan(prediction))
    if not both.any():
        return np.inf
    size = np.maximum(np.maximum(np.abs(point), np.abs(prediction)), 1e-300)
    return float(np.sqrt(np.mean(np.abs((point - prediction)[both] / size[both]) ** 2)))


def track_points(steps: tuple[Step, ...], settings: TrackingSettings) -> tuple[Track, ...]:
    """Tracks of all interacting fixed points, best first: those that reach the last step, then by the mean
    distance over their second half."""
    paths = _link(steps, settings)
    paths = [p for p in paths if len(p.steps) >= min(settings.shortest, len(steps))]
    last = len(steps) - 1

    def quality(path: _Path) -> tuple[bool, bool, float]:
        kinds = [steps[s].fixed_points[p].kind for s, p in zip(path.steps, path.points, strict=True)]
        half = path.distance[len(path.distance) // 2 :]
        finite = [d for d in half if np.isfinite(d)]
        return (path.steps[-1] != last, kinds[-1] != "physical", float(np.mean(finite)) if finite else np.inf)

    chosen = sorted(paths, key=quality)[: settings.most]
    return tuple(_track(f"track {i + 1}", path, steps) for i, path in enumerate(chosen))


def _link(steps: tuple[Step, ...], settings: TrackingSettings) -> list[_Path]:
    prints = [[fingerprint(p) for p in step.fixed_points] for step in steps]
    paths: list[_Path] = []
    for s, step in enumerate(steps):
        eligible = [i for i, p in enumerate(step.fixed_points) if p.kind != "gaussian"]
        open_paths = [p for p in paths if p.steps[-1] >= s - 2]
        table = {
            (k, i): distance(prints[s][i], _prediction(path, prints))
            for k, path in enumerate(open_paths) for i in eligible
        }
        taken: set[int] = set()
        for (k, i), gap in sorted(table.items(), key=lambda item: item[1]):
            path = open_paths[k]
            if path.steps[-1] == s or i in taken or gap > settings.reach:
                continue
            others = [g for (kk, ii), g in table.items() if kk == k and ii != i]
            path.steps.append(s)
            path.points.append(i)
            path.distance.append(gap)
            path.next_distance.append(min(others, default=np.inf))
            taken.add(i)
        for i in eligible:
            if i not in taken and step.fixed_points[i].kind == "physical":
                paths.append(_Path([s], [i], [np.nan], [np.inf]))
    return paths


def _prediction(path: _Path, prints: list[list[np.ndarray]]) -> np.ndarray:
    recent = [prints[s][i] for s, i in zip(path.steps[-2:], path.points[-2:], strict=True)]
    if len(recent) == 1:
        return recent[0]
    return np.where(np.isnan(recent[0]), recent[1], (recent[0] + recent[1]) / 2)


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
