"""A study as the views meet it: Ising-like, orders 2 to 12, several fixed points a step. The numbers are made up after
the pattern of the local potential approximation in three dimensions; nothing is computed."""

from __future__ import annotations

import numpy as np
import pytest

from frg.errors import Outcome
from frg.records import Extrapolation, FixedPoint, Growth, Inputs, Run, Step, Track, Verdict

ORDERS = tuple(range(2, 13))
LONG_NOTE = "the regulated propagator is negative at the minimum: an artefact of the truncation, see the guard on poles"


def exponents(order: int, shift: float = 0.0) -> np.ndarray:
    """One relevant exponent, one real irrelevant one, then a conjugate pair (from order 4 on) and real ones."""
    leading = [1.539499459 + 0.3 * (-0.4) ** order + shift, -0.655745939 + 0.5 * (-0.5) ** order]
    deep = [-3.18 - 2.8 * j for j in range(order - 2)]
    values = [complex(x) for x in (*leading, *deep)][:order]
    if order >= 4:
        values[2:4] = [complex(-3.625, 1.27), complex(-3.625, -1.27)]
    return np.array(values)


def fixed_point(label: str, kind: str, order: int, theta: np.ndarray, first: float, **notes: str) -> FixedPoint:
    names = ("U_min", *(f"U{j}" for j in range(2, order + 1)))
    return FixedPoint(
        label=label, kind=kind, names=names,
        couplings=np.array([first * (-3.7) ** j for j in range(order)]), eta={"phi": 0.0},
        theta=theta, right=np.eye(order), left=np.eye(order),
        theta_odd=np.array([2.5 + 0j, 0.5 + 0j, -1.886703838 + 0j]) if kind == "physical" else np.zeros(0, dtype=complex),
        residual=3.2e-15, condition=411.0, relevant=int(np.sum(theta.real > 1e-6)),
        marginal=int(np.sum(np.abs(theta.real) <= 1e-6)),
        certified=True if kind == "physical" else None, notes=tuple(notes.values()),
        landmarks={} if kind == "gaussian" else {"U_min": first, "U'(0)": -0.18606424947},
    )


def study_step(order: int) -> Step:
    gaussian = np.array([complex(3 - j) for j in range(1, order + 1)])
    return Step(
        order={"n": order}, outcome=Outcome.FOUND,
        fixed_points=(
            fixed_point("A", "physical", order, exponents(order), 0.0306479 + 0.001 * 0.5**order),
            fixed_point("G", "gaussian", order, gaussian, 0.0),
            fixed_point("S1", "spurious", order, exponents(order, shift=1.3), 0.0312, note=LONG_NOTE),
        ),
        search={"starts": 400, "converged": 131, "duplicates": 128, "failed": 269}, seconds=0.4 + 0.01 * order,
        notes=("2 spurious root(s) set aside; --all lists them",),
    )


def study_track(label: str, point: int, steps: tuple[Step, ...]) -> Track:
    theta = np.full((len(steps), ORDERS[-1]), complex(np.nan, np.nan))
    for k, step in enumerate(steps):
        values = step.fixed_points[point].theta
        theta[k, : len(values)] = values
    further = np.full(len(steps), 0.02)
    further[0] = np.inf
    return Track(
        label=label, rule="nearest in scaled couplings and spectrum", steps=np.arange(len(steps)),
        points=np.full(len(steps), point), theta=theta, distance=0.01 * 0.5 ** np.arange(len(steps)), next_distance=further,
        notes=(),
    )


def study_verdict() -> Verdict:
    return Verdict(
        counts=(1,) * len(ORDERS), settled_from=2, relevant=1, finite="supported",
        reasons=("1 relevant direction at each of the last 11 steps, from order 2 on", "no order is certified"),
        exponents=(
            Extrapolation(value=1.5394994591 + 0j, error=6.1e-8, last=1.5394994 + 0j),
            Extrapolation(value=-0.6557459391 + 0j, error=4.2e-7, last=-0.6557459 + 0j),
            Extrapolation(value=-3.625 + 1.27j, error=2e-3, last=-3.62 + 1.27j),
            Extrapolation(value=complex(np.nan, np.nan), error=np.inf, last=-5.9 + 0j),
        ),
        growth=Growth(canonical=np.arange(1.0, 5.0), entering=np.array([0.66, 3.6, 3.6, np.nan]), slope=1.96, offset=1.1,
                      scatter=np.inf),
    )


@pytest.fixture()
def study_run() -> Run:
    """Eleven orders, two tracks, a verdict; not all of its numbers are finite."""
    steps = tuple(study_step(n) for n in ORDERS)
    return Run(
        inputs=Inputs(
            title="Ising, local potential about the minimum", truncation_text='title = "Ising"\n',
            parameters={"d": "3", "N": "5/2", "g": "sqrt(2)"}, equations="d_t U = ...", latex=r"\partial_t U = \dots",
            regulator="exponential", regulator_parameters={"alpha": 2.0, "s": 1.0},
            settings={"orders": list(ORDERS)}, signature="0123456789abcdef" * 4,
        ),
        command="frg converge ising.toml --orders 2..12", created_utc="2026-12-01T07:41:57Z", frg_version="0.1.0",
        packages={"numpy": "2.4"}, status="complete", steps=steps,
        tracks=(study_track("track A", 0, steps), study_track("track G", 1, steps)), verdict=study_verdict(),
    )
