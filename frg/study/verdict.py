"""Does the number of relevant directions stay finite? Evidence, with reasons; never a proof."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from frg.records import Extrapolation, Growth, Step, Track, Verdict, counted
from frg.study.acceleration import extrapolate


@dataclass(frozen=True, kw_only=True)
class VerdictSettings:
    """`settled` steps with one count are needed at the end; entering exponents must sink with at least
    `sinking` times the canonical slope; an exponent runs away when it grows by more than `runaway` (relative) at
    each of the last three steps; `exponents` is how many are extrapolated."""

    settled: int
    sinking: float
    runaway: float
    exponents: int


def judge(
    steps: tuple[Step, ...], tracks: tuple[Track, ...], canonical: list[np.ndarray | None],
    settings: VerdictSettings,
) -> Verdict:
    """The verdict on the best track. `canonical` holds each step's canonical exponents (None: unknown)."""
    if not tracks:
        return Verdict(
            counts=tuple(-1 for _ in steps), settled_from=None, relevant=None, finite="undecided",
            reasons=("no interacting fixed point could be followed through the study",), exponents=(),
        )
    track = tracks[0]
    counts = _counts(steps, track)
    settled = _settled_index(counts)
    length = len(counts) - settled if settled is not None else 0
    growth = _growth(steps, track, canonical)
    exponents = tuple(_extrapolated(track, j) for j in range(min(settings.exponents, track.theta.shape[1])))
    relevant = counts[-1] if settled is not None and length >= settings.settled else None
    settled_from = _order(steps[settled]) if settled is not None and relevant is not None else None
    against, missing, favour = _weigh(steps, track, counts, settled, length, growth, settings)
    finite = "not supported" if against else ("undecided" if missing else "supported")
    reasons = (*against, *missing, *favour, *_limits(steps, track))
    return Verdict(
        counts=counts, settled_from=settled_from, relevant=relevant, finite=finite,
        reasons=reasons, exponents=exponents, growth=growth,
    )


def _order(step: Step) -> int:
    return next(iter(step.order.values()), 0)


def _counts(steps: tuple[Step, ...], track: Track) -> tuple[int, ...]:
    counts = [-1] * len(steps)
    for s, p in zip(track.steps, track.points, strict=True):
        counts[int(s)] = steps[int(s)].fixed_points[int(p)].relevant
    return tuple(counts)


def _settled_index(counts: tuple[int, ...]) -> int | None:
    """First index from which all later counts equal the last one (None if the last step lacks the point)."""
    if not counts or counts[-1] < 0:
        return None
    i = len(counts) - 1
    while i > 0 and counts[i - 1] == counts[-1]:
        i -= 1
    return i


def _extrapolated(track: Track, column: int) -> Extrapolation:
    return extrapolate(track.theta[:, column])


def _growth(steps: tuple[Step, ...], track: Track, canonical: list[np.ndarray | None]) -> Growth | None:
    """Exponents against the canonical ones of the operators in the order in which they enter, at the last step of the
    track. Only exponents that moved by less than `SETTLING` since the step before count: the youngest
    ones are not yet exponents of anything, and say nothing about how those that settle sink."""
    if len(track.steps) < 2:
        return None
    last, before = (
        steps[int(s)].fixed_points[int(p)].theta
        for s, p in zip(track.steps[[-1, -2]], track.points[[-1, -2]], strict=True)
    )
    known = canonical[int(track.steps[-1])]
    if known is None:
        return None
    size = min(len(last), len(before), len(known))
    moved = np.abs(last[:size] - before[:size]) / (1 + np.abs(last[:size]))
    settled = int(np.argmax(moved > SETTLING)) if (moved > SETTLING).any() else size
    entering, expected = last[:settled].real, known[:settled]
    if settled < 3 or np.ptp(expected) == 0:
        return None
    slope, offset = np.polyfit(-expected, -entering, 1)
    scatter = float(np.sqrt(np.mean((-entering - offset + slope * expected) ** 2)))
    return Growth(canonical=expected, entering=entering, slope=float(slope), offset=float(offset),
                  scatter=scatter)


SETTLING = 0.1


def _weigh(
    steps: tuple[Step, ...], track: Track, counts: tuple[int, ...], settled: int | None, length: int,
    growth: Growth | None, settings: VerdictSettings,
) -> tuple[list[str], list[str], list[str]]:
    """(reasons against, what is missing, reasons in favour)."""
    against: list[str] = []
    missing: list[str] = []
    favour: list[str] = []
    known = [c for c in counts if c >= 0]
    if settled is None:
        missing.append("the tracked fixed point was not found at the last order")
    elif length >= settings.settled:
        favour.append(f"{counted(counts[-1], 'relevant direction')} at each of the last {length} steps, from order "
                      f"{_order(steps[settled])} on")
    elif len(known) >= settings.settled and all(np.diff(known[-settings.settled:]) > 0):
        against.append(f"the count of relevant directions rises at each of the last {settings.settled} steps: "
                       f"{', '.join(str(c) for c in known)}")
    else:
        missing.append(f"the count is constant only over the last {counted(length, 'step')}; {settings.settled} are asked for")
    if _runs_away(track, settings.runaway):
        against.append("a relevant exponent grows with the order instead of settling")
    if growth is None:
        missing.append("too few orders, or operators of unknown canonical dimension, to compare entering exponents")
    elif growth.slope >= settings.sinking and growth.entering[-1] < 0:
        favour.append(f"entering exponents sink with {growth.slope:.2f} times the canonical slope "
                      f"(offset {growth.offset:.2f}, scatter {growth.scatter:.2f})")
    elif growth.slope >= settings.sinking:
        missing.append(f"entering exponents sink with {growth.slope:.2f} times the canonical slope, but none that has "
                       "settled is irrelevant yet: go to higher orders")
    else:
        missing.append(f"entering exponents do not sink along with the canonical ones (slope {growth.slope:.2f})")
    return against, missing, favour


def _runs_away(track: Track, threshold: float) -> bool:
    for column in track.theta.T:
        lead = column[np.isfinite(column)].real
        if len(lead) >= 4 and lead[-1] > 0:
            ratios = lead[-3:] / lead[-4:-1]
            if np.all(lead[-4:] > 0) and np.all(ratios > 1 + threshold):
                return True
    return False


def _limits(steps: tuple[Step, ...], track: Track) -> list[str]:
    """What a reader must know beside the verdict."""
    notes = list(track.notes)
    close = [
        _order(steps[int(s)]) for s, d, n in
        zip(track.steps, track.distance, track.next_distance, strict=True)
        if np.isfinite(d) and n < 2 * d
    ]
    if close:
        listed = ", ".join(str(c) for c in close)
        notes.append(f"another root lies less than twice as far from the prediction at order(s) {listed}")
    proved = [steps[int(s)].fixed_points[int(p)].certified for s, p in zip(track.steps, track.points, strict=True)]
    if not any(proved):
        notes.append("no order is certified")
    notes.append("a convergence study within one family of truncations is evidence, not proof")
    return notes
