"""Tracking, acceleration and the verdict on sequences whose limits and counts are known."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest

from frg.cli.problem import read_problem
from frg.cli.settings import study_settings
from frg.errors import InputError, Outcome
from frg.records import FixedPoint, Step, Track
from frg.study.acceleration import extrapolate, wynn_epsilon
from frg.study.convergence import convergence_study
from frg.study.tracking import TrackingSettings, track_points
from frg.study.verdict import VerdictSettings, judge

SETTINGS = VerdictSettings(settled=3, sinking=0.5, runaway=0.2, exponents=3)


def point(theta: list[complex], couplings: list[float], kind: str = "physical") -> FixedPoint:
    n = len(theta)
    values = np.array(theta, dtype=complex)
    return FixedPoint(
        label="A", kind=kind, names=tuple(f"U{i + 1}" for i in range(n)), couplings=np.array(couplings, dtype=float),
        eta={}, theta=values, right=np.eye(n, dtype=complex), left=np.eye(n, dtype=complex),
        theta_odd=np.zeros(0, dtype=complex), residual=1e-15, condition=1.0,
        relevant=int(np.sum(values.real > 1e-6)), marginal=0,
    )


def step(order: int, *points: FixedPoint) -> Step:
    return Step(order={"n": order}, outcome=Outcome.FOUND, fixed_points=points)


def settling(order: int, shift: float = 0.0) -> FixedPoint:
    """Exponents that converge geometrically to 1.5, -0.7, -2.9, ... (made up; only their limits matter)."""
    theta = [1.5 - 2.2 * j + shift + (-0.4) ** (order - j) for j in range(order)]
    return point(theta, [1.0 + shift + (-0.4) ** order] * order)


def test_wynn_epsilon_is_exact_for_one_geometric_term() -> None:
    # P. Wynn, Math. Tables Aids Comput. 10 (1956) 91: column 2 is Aitken's process, exact for a + b r^n
    sequence = np.array([2 + 3 * 0.5**n for n in range(5)])
    assert wynn_epsilon(sequence)[1] == pytest.approx(2, abs=1e-12)


@pytest.mark.parametrize(
    "limit, terms",
    [
        (math.log(2), np.cumsum([(-1) ** k / (k + 1) for k in range(14)])),
        (math.pi / 4, np.cumsum([(-1) ** k / (2 * k + 1) for k in range(14)])),
        (math.e, np.cumsum([1 / math.factorial(k) for k in range(10)])),
        (1.0, np.array([1 + 0.5**n * math.cos(1.3 * n) for n in range(16)])),
        (math.pi**2 / 6, np.cumsum([1 / (k + 1) ** 2 for k in range(40)])),
    ],
)
def test_the_error_of_an_extrapolation_covers_the_limit(limit: float, terms: np.ndarray) -> None:
    """Classical series with known sums. The last converges logarithmically, which acceleration of this kind cannot do:
    there the error must still be honest to within the size of the correction."""
    found = extrapolate(terms.astype(complex))
    slow = terms[-1] - terms[-2] > 0.2 / len(terms) ** 2 and np.all(np.diff(terms) > 0)
    if slow and limit > 1.6:
        assert found.error > abs(terms[-1] - terms[-2])
    else:
        assert abs(found.value - limit) <= found.error


def test_extrapolation_of_the_polynomial_orders_covers_the_global_exponent(shelf) -> None:
    """LPA orders against the exponent of the global potential (table: 0.649561773880648)."""
    problem = read_problem(str(shelf / "ising_lpa.toml"), (), None)
    study = convergence_study(problem.equations, tuple(range(2, 13)), study_settings(thorough=False))
    steps = tuple(study.steps())
    tracks, verdict = study.conclude(steps)
    assert abs(verdict.exponents[0].value.real - 1 / 0.649561773880648) <= verdict.exponents[0].error < 1e-4
    assert abs(verdict.exponents[1].value.real + 0.655745939193338) <= verdict.exponents[1].error < 1e-2
    assert (verdict.finite, verdict.relevant, verdict.settled_from) == ("supported", 1, 2)
    # pattern of the table for polynomial orders, n = 4 (computed independently; D. Litim, Nucl. Phys. B 631 (2002) 128)
    at_four = steps[2].fixed_points[int(tracks[0].points[2])]
    assert 1 / at_four.theta[0].real == pytest.approx(0.6505737945092, abs=1e-12)
    assert -at_four.theta[1].real == pytest.approx(0.59886386305, abs=1e-11)
    # resuming after any number of steps gives the same steps
    again = convergence_study(problem.equations, tuple(range(2, 13)), study_settings(thorough=False))
    for resumed, before in zip(again.steps(steps[:8]), steps[8:], strict=True):
        for a, b in zip(resumed.fixed_points, before.fixed_points, strict=True):
            assert np.array_equal(a.couplings, b.couplings) and np.array_equal(a.theta, b.theta)


def test_a_track_follows_continuity_and_names_the_next_root() -> None:
    steps = tuple(step(n, settling(n), settling(n, shift=0.8)) for n in range(3, 9))
    tracks = track_points(steps, TrackingSettings(reach=0.7, shortest=2, most=4))
    assert len(tracks) == 2
    assert tracks[0].steps.tolist() == list(range(6))
    assert len(set(tracks[0].points.tolist())) == 1
    assert np.all(tracks[0].next_distance[2:] > tracks[0].distance[2:])


def test_a_gap_is_noted_and_bridged() -> None:
    steps = tuple(step(n, settling(n)) if n != 5 else step(n) for n in range(3, 9))
    (track,) = track_points(steps, TrackingSettings(reach=0.7, shortest=2, most=4))
    assert track.steps.tolist() == [0, 1, 3, 4, 5]
    assert "n = 5" in track.notes[0]


def test_gaussian_points_are_not_tracked() -> None:
    zero = point([2, 1, 0], [0, 0, 0], kind="gaussian")
    steps = tuple(step(n, zero, settling(n)) for n in range(3, 6))
    (track,) = track_points(steps, TrackingSettings(reach=0.7, shortest=2, most=4))
    assert track.points.tolist() == [1, 1, 1]


def conclude(points: list[FixedPoint], canonical: list[float] | None) -> str:
    steps = tuple(step(i + 3, p) for i, p in enumerate(points))
    tracks = (Track(label="track 1", rule="", steps=np.arange(len(points)), points=np.zeros(len(points), dtype=int),
                    theta=np.array([[p.theta[0]] for p in points]), distance=np.full(len(points), 1e-3),
                    next_distance=np.full(len(points), 1.0)),)
    known = [None if canonical is None else np.array(canonical[: len(p.theta)]) for p in points]
    return judge(steps, tracks, known, SETTINGS).finite


def test_verdict_supported_not_supported_undecided() -> None:
    canonical = [1 - j for j in range(12)]
    assert conclude([settling(n) for n in range(3, 12)], [float(c) for c in canonical]) == "supported"
    rising = [point([2.0] * k + [-1.0], [1.0] * (k + 1)) for k in range(1, 8)]
    assert conclude(rising, [float(c) for c in canonical]) == "not supported"
    assert conclude([settling(n) for n in range(3, 12)], None) == "undecided"
    running = [point([2.0 * 1.5**k, -1.0, -2.0, -3.0], [1.0] * 4) for k in range(8)]
    assert conclude(running, [float(c) for c in canonical]) == "not supported"
    assert judge((step(3),), (), [None], SETTINGS).finite == "undecided"


def test_growth_measures_the_slope_against_canonical_dimensions() -> None:
    canonical = np.array([2.0, 1.0, 0.0, -1.0, -2.0])
    theta = [complex(2 * c - 0.5) for c in canonical]
    points = [point(theta, [1.0] * 5), point(theta, [1.0] * 5)]
    steps = tuple(step(i + 3, p) for i, p in enumerate(points))
    tracks = track_points(steps, TrackingSettings(reach=0.7, shortest=2, most=1))
    growth = judge(steps, tracks, [canonical, canonical], SETTINGS).growth
    assert growth is not None
    assert growth.slope == pytest.approx(2) and growth.offset == pytest.approx(0.5)


def test_a_study_needs_an_order_axis(shelf) -> None:
    problem = read_problem(str(shelf / "one_coupling.toml"), (), None)
    with pytest.raises(InputError, match="no order axis"):
        convergence_study(problem.equations, (), study_settings(thorough=False))
    problem = read_problem(str(shelf / "ising_lpa.toml"), (), None)
    with pytest.raises(InputError, match="rise"):
        convergence_study(problem.equations, (4, 2), study_settings(thorough=False))


def test_settings_are_plain_data() -> None:
    """They go into the signature of a run."""
    text = repr(dataclasses.asdict(study_settings(thorough=True)))
    assert "object at" not in text
