"""The convergence study: a generator of steps over the orders of a truncation, then tracks and a verdict."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from frg.derive.equations import FlowEquations
from frg.errors import InputError, Place
from frg.records import Step, Track, Verdict
from frg.solve.choose import make_search
from frg.solve.curvaturesearch import physical_points
from frg.solve.search import AbstractSearch, PolynomialSearch, SearchSettings, Warm, run_step
from frg.study.canonical import canonical_exponents
from frg.study.tracking import TrackingSettings, track_points
from frg.study.verdict import VerdictSettings, judge


@dataclass(frozen=True, kw_only=True)
class StudySettings:
    """All choices of a study beyond the truncation and the regulator."""

    search: SearchSettings
    tracking: TrackingSettings
    verdict: VerdictSettings


@dataclass(frozen=True, kw_only=True, eq=False)
class ConvergenceStudy:
    """One truncation at several orders. One compilation serves all of them."""

    equations: FlowEquations
    orders: tuple[int, ...]
    settings: StudySettings
    search: AbstractSearch

    def steps(self, done: tuple[Step, ...] = ()) -> Iterator[Step]:
        """Steps after those already `done` (the first orders, from an interrupted run). The result does not
        depend on whether the study was interrupted: a step sees only its order and the steps before."""
        name = self.equations.truncation.study.order
        known = list(done)
        for order in self.orders[len(done):]:
            known.append(run_step(self.search, name, order, warm_start(known, self.orders)))
            yield known[-1]

    def conclude(self, steps: tuple[Step, ...]) -> tuple[tuple[Track, ...], Verdict]:
        """Tracks and the verdict from all steps."""
        tracks = track_points(steps, self.settings.tracking)
        canonical: list[np.ndarray | None] = [None] * len(steps)
        if isinstance(self.search, PolynomialSearch):
            flow = self.search.flow
            canonical = [canonical_exponents(self.equations, flow, n) for n in self.orders[: len(steps)]]
        return tracks, judge(steps, tracks, canonical, self.settings.verdict)


def warm_start(known: list[Step], orders: tuple[int, ...]) -> Warm:
    """What the next step may start from: the steps before it."""
    if not known:
        return Warm()
    return Warm(
        points=tuple(
            dict(zip(p.names, (float(c) for c in p.couplings), strict=True)) for p in known[-1].fixed_points
        ),
        earlier=tuple(tuple(physical_points(step.fixed_points)) for step in known),
        order=orders[len(known) - 1],
    )


def convergence_study(
    equations: FlowEquations, orders: tuple[int, ...], settings: StudySettings
) -> ConvergenceStudy:
    """A study over `orders`, rising. Raises InputError for a truncation without an order axis."""
    truncation = equations.truncation
    if not orders:
        raise InputError(
            "this truncation has no order axis to study",
            remedy="give a running function an order in the order symbol and [study] values, or use `frg solve`",
            place=Place(source=truncation.source),
        )
    if list(orders) != sorted(set(orders)):
        raise InputError(
            f"orders must rise without repetition, not {', '.join(map(str, orders))}",
            remedy='write them as "2..12" or in rising order', place=Place(source=truncation.source),
        )
    search = make_search(equations, orders, settings.search)
    return ConvergenceStudy(equations=equations, orders=orders, settings=settings, search=search)
