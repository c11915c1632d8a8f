"""Quadrature rules for loops: as few nodes as give the accuracy wanted, with a measured error.

Every loop integrand is d_t R times powers of propagators times smooth factors. So the measure
y^(d/2-1) (s - y s') P^-1 (1 + y/min P)^(1-decay) dy is kept exact and the rest is taken for a polynomial in a variable z of
the form x^q/(x^q + c^q), x the distance from an end of the panel: Gauss quadrature for that measure (G. Golub, J. Welsch,
Math. Comp. 23 (1969) 221), its recurrence computed by the Lanczos procedure from a fine discretisation of the measure
(W. Gautschi, Acta Numerica 5 (1996) 45). c, q and the number of nodes are tried out on test
integrands; the choice among them is a heuristic, the error that is reported is measured.
Where P has its minimum inside the range (propagators of negative mass then have a pair of poles there), a rule
of two panels that meet at the minimum is tried as well.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from frg.errors import InputError
from frg.regulator.base import LoopRule
from frg.regulator.reference import (
    DEEPEST,
    FEWER,
    NODES,
    Points,
    algebraic_edges,
    compact_edges,
    exponential_tail,
    jacobi,
    reference_points,
)
from frg.regulator.tables import Table

MASSES = (DEEPEST, -0.5, 0.0, 1.0, 10.0)  # of test integrands, in units of min P
MOST = 96  # nodes of a rule
PROBES = 8, 24  # nodes a variable is judged with
SCALES = (0.02, 0.1, 0.3, 1.0, 3.0, 1e3)  # c of a variable in units of the median of the measure
EXACT = 2e-16  # rounding
UNUSABLE = 1e-4  # relative error beyond which a rule is refused, whatever the accuracy wanted


@dataclass(frozen=True, kw_only=True)
class Loop:
    """What a rule has to integrate: table of s, number of derivatives of s in the integrand, dimension, min P and
    its place `dip` (0: at the origin), least power of the propagator.

    For shapes that are not smooth at y = 1: `edge`, the exponent of (1-y) that the measure gets on top, and
    `steepest`, the exponent with which the most singular integrand goes there; `guarded`: the highest
    derivatives of s are integrable only against d_t R."""

    table: Table  # s and at least two derivatives
    derivatives: int
    dimension: float
    lowest: float
    dip: float
    decay: int
    accuracy: float
    edge: float = 0.0
    steepest: float = 0.0
    guarded: bool = False

    def density(self, points: Points) -> np.ndarray:
        """The measure over y^(d/2-1), up to a constant: positive."""
        y, s = points.y, points.s
        insertion = s[0] - y * s[1]
        if (insertion < 0).any():
            insertion = s[0] * (1 + y)  # s rises somewhere; any positive measure of the same decay will do
        # towards the origin a single propagator, whatever `decay`: of a power law, P^-decay and y s' vanish there
        propagators = (1 / (y + s[0])) * (1 + y / self.lowest) ** (1 - self.decay)
        return insertion * propagators * ((1 - y) ** self.edge if self.edge else 1.0)

    def tests(self, points: Points) -> np.ndarray:
        """Test integrands at the points, (number, m): d_t R / (P+w)^k, its eta part, derivatives of s."""
        y, s = points.y, points.s
        insertion, P = 2 * (s[0] - y * s[1]), y + s[0]
        rows = [
            insertion * (1 / (P + w * self.lowest)) ** k for w in MASSES for k in range(self.decay, self.decay + 3)
        ]
        rows += [s[0] * (1 / (P + w * self.lowest)) ** self.decay for w in (DEEPEST, 1.0)]
        for w in (-0.5, 1.0):
            G = 1 / (P + w * self.lowest)
            factor = insertion * G if self.guarded else 1.0
            rows += [factor * y**j * s[j] * G ** (self.decay + 1) for j in range(1, self.derivatives + 1)]
        return np.array(rows)


@dataclass(frozen=True)
class _Variable:
    """z = x^q / (x^q + c^q), x = y - low or high - y."""

    low: float
    high: float
    c: float
    q: float = 1.0
    backwards: bool = False

    def of(self, y: np.ndarray) -> np.ndarray:
        x = (self.high - y if self.backwards else y - self.low) ** self.q
        return x / (x + self.c**self.q)

    def back(self, z: np.ndarray) -> np.ndarray:
        x = self.c * (z / (1 - z)) ** (1 / self.q)
        return self.high - x if self.backwards else self.low + x


@dataclass(frozen=True, kw_only=True)
class _Ends:
    """The range (0, high), and the powers of the distance from its ends that are tried as variables."""

    high: float = math.inf
    low_roots: tuple[float, ...] = (1.0,)
    high_roots: tuple[float, ...] = (1.0,)

    def variables(self, span: tuple[float, float], median: float) -> list[_Variable]:
        low, high = span
        found = [
            _Variable(low, high, c * (median - low), q)
            for c in SCALES for q in (self.low_roots if low == 0.0 else (1.0,))
        ]
        if math.isfinite(high):
            found += [
                _Variable(low, high, c * (high - median), q, True)
                for c in SCALES for q in (self.high_roots if high == self.high else (1.0,))
            ]
        return found


def exact_flat_rule(table: Table, dimension: float) -> LoopRule:
    """alpha = 1, flat: P = 1 below y = 1 and s, s' are linear, so that two nodes of Gauss-Jacobi with weight
    y^(d/2-1) are exact for integrands at most cubic in y; with the surface term of the kink."""
    y, weight = jacobi(2, dimension / 2 - 1, 0.0)
    points = Points(y=y, weight=weight, s=table(y))
    return _rule(points, len(points.s) - 1, kink=-1.0, subtract=False, error=EXACT, lowest=1.0)


def compact_rule(loop: Loop, *, smooth: bool, kink: float | None = None, roots: Sequence[float] = (1.0,)) -> LoopRule:
    """For shapes that vanish beyond y = 1. `smooth`: s is smooth up to y = 1; otherwise powers (1-y)^q with q from
    `roots` are tried as variable. `kink`: the slope of s below y = 1 where it jumps to 0 there."""
    dip = loop.dip if loop.dip < 1 else 0.0
    edges = compact_edges(loop.table, 1.0, dip, loop.lowest, smooth_end=smooth)

    def points(count: int) -> Points:
        return reference_points(loop.table, loop.dimension, edges, count=count, edge=loop.steepest)

    points_used, error = _economical(loop, points, _Ends(high=1.0, high_roots=tuple(roots)), dip)
    return _rule(points_used, loop.derivatives, kink=kink, subtract=False, error=error, lowest=loop.lowest)


def decaying_rule(loop: Loop, *, roots: Sequence[float] = (1.0,)) -> LoopRule:
    """For shapes that fall faster than any power; the range is cut where the integrand is negligible. Powers y^q
    with q from `roots` are tried as variable, for shapes that may not be smooth at the origin if there are several."""
    end = exponential_tail(loop.table, loop.dimension)
    edges = compact_edges(
        loop.table, end, loop.dip, loop.lowest, smooth_end=True, smooth_origin=len(roots) == 1
    )

    def points(count: int) -> Points:
        return reference_points(loop.table, loop.dimension, edges, count=count)

    points_used, error = _economical(loop, points, _Ends(low_roots=tuple(roots)), loop.dip)
    return _rule(points_used, loop.derivatives, kink=None, subtract=False, error=error, lowest=loop.lowest)


def algebraic_rule(
    loop: Loop, *, fall: float, subtract: bool = False, roots: Sequence[float] = (1.0,), rise: float = 0.0
) -> LoopRule:
    """For integrands that fall like y^(-fall), fall > d/2. Powers y^q with q from `roots` are tried as variable.
    s grows like y^(-rise) towards the origin."""
    edges = algebraic_edges(loop.table, loop.dip, loop.lowest, rise)

    def points(count: int) -> Points:
        return reference_points(loop.table, loop.dimension, edges, count=count, fall=fall)

    points_used, error = _economical(loop, points, _Ends(low_roots=tuple(roots)), loop.dip)
    return _rule(points_used, loop.derivatives, kink=None, subtract=subtract, error=error, lowest=loop.lowest)


def _economical(loop: Loop, points_of: Callable[[int], Points], ends: _Ends, dip: float) -> tuple[Points, float]:
    """The rule with the fewest nodes that gives the accuracy, or the most accurate one, and its error."""
    fine = points_of(NODES)
    exact, sizes = _integrals(loop, fine)
    check, _ = _integrals(loop, points_of(FEWER))
    doubt = _worst(check, exact, sizes)
    if not doubt < UNUSABLE:
        raise InputError(
            f"the loop integrals of this regulator do not converge (relative change {doubt:.1e} on a finer rule)",
            remedy="choose another regulator or dimension",
        )
    plans = [[(0.0, ends.high)]]
    if dip:
        plans.append([(0.0, dip), (dip, ends.high)])
    found: list[tuple[Points, float]] = []
    for plan in plans:
        pieces = [_piece(loop, fine.between(*span), span, ends, sizes, len(plan)) for span in plan]
        joined = Points(
            y=np.concatenate([p.y for p in pieces]), weight=np.concatenate([p.weight for p in pieces]),
            s=np.concatenate([p.s for p in pieces], axis=1),
        )
        found.append((joined, _worst(_integrals(loop, joined)[0], exact, sizes)))
    good = [f for f in found if f[1] < loop.accuracy]
    points, error = min(good, key=lambda f: len(f[0].y)) if good else min(found, key=lambda f: f[1])
    if error > max(UNUSABLE, loop.accuracy):
        raise InputError(
            f"{MOST} nodes are too few for the loop integrals of this regulator (relative error {error:.1e})",
            remedy="choose a regulator with less structure",
        )
    # the fine discretisation stands far below its distance from the sparser one, by the ratio of their orders
    return points, max(error, doubt ** (NODES / FEWER), EXACT)


def _piece(
    loop: Loop, fine: Points, span: tuple[float, float], ends: _Ends, sizes: np.ndarray, pieces: int
) -> Points:
    """The Gauss rule of one panel, with the best variable and the fewest nodes."""
    exact, _ = _integrals(loop, fine)
    measure = fine.weight * loop.density(fine)

    def rule(variable: _Variable, count: int) -> tuple[Points, float]:
        z, mass = gauss(variable.of(fine.y), measure, count)
        y = variable.back(z)
        bare = Points(y=y, weight=mass, s=loop.table(y))
        points = Points(y=y, weight=mass / loop.density(bare), s=bare.s)
        return points, _worst(_integrals(loop, points)[0], exact, sizes)

    cumulated = np.cumsum(measure)
    median = float(fine.y[np.searchsorted(cumulated, cumulated[-1] / 2)])
    if math.isinf(span[1]):
        median = min(median, span[0] + 3 * (loop.dip or loop.lowest))  # a tail may hold most of the measure
    most, wanted = MOST // pieces, loop.accuracy / (1.2 * pieces)

    def forecast(variable: _Variable) -> float:
        # number of nodes for `wanted`, were the convergence geometric
        few, many = (max(rule(variable, count)[1], EXACT) for count in PROBES)
        rate = math.log(few / many) / (PROBES[1] - PROBES[0])
        return math.log(few / wanted) / max(rate, 1e-3)

    variable = min(ends.variables(span, median), key=forecast)
    low, high, best = 1, 4, rule(variable, 4)
    while best[1] > wanted and high < most:
        low, high = high, min(2 * high, most)
        best = min(best, rule(variable, high), key=lambda r: r[1])
    if best[1] > wanted:
        return best[0]
    while high - low > 1:
        middle = (low + high) // 2
        tried = rule(variable, middle)
        if tried[1] < wanted:
            high, best = middle, tried
        else:
            low = middle
    return best[0]


def gauss(z: np.ndarray, mass: np.ndarray, count: int) -> tuple[np.ndarray, np.ndarray]:
    """Nodes and weights of the Gauss rule of the discrete measure sum_i mass_i delta(z - z_i), of `count` points
    or half as many as the measure has.

    Lanczos with full reorthogonalisation gives the recurrence (W. Gautschi, Acta Numerica 5 (1996) 45), its
    eigenproblem the rule (G. Golub, J. Welsch, Math. Comp. 23 (1969) 221)."""
    from scipy.linalg import eigh_tridiagonal

    total, count = mass.sum(), min(count, len(z) // 2)
    basis = np.zeros((count, len(z)))
    diagonal, off = np.zeros(count), np.zeros(max(count - 1, 0))
    basis[0] = np.sqrt(mass / total)
    for k in range(count):
        diagonal[k] = basis[k] @ (z * basis[k])
        if k == count - 1:
            break
        rest = z * basis[k]
        for _ in range(2):
            rest = rest - basis[: k + 1].T @ (basis[: k + 1] @ rest)
        off[k] = np.linalg.norm(rest)
        basis[k + 1] = rest / off[k]
    nodes, vectors = eigh_tridiagonal(diagonal, off)
    # inside the hull in exact arithmetic; rounding can put a node beside it
    return np.clip(nodes, z.min(), z.max()), total * vectors[0] ** 2


def _integrals(loop: Loop, points: Points) -> tuple[np.ndarray, np.ndarray]:
    """The test integrals, and those of the absolute values."""
    rows = loop.tests(points)
    return rows @ points.weight, np.abs(rows) @ points.weight


def _worst(values: np.ndarray, exact: np.ndarray, sizes: np.ndarray) -> float:
    some = sizes > 0
    error = float(np.max(np.abs(values - exact)[some] / sizes[some]))
    return error if math.isfinite(error) else math.inf


def _rule(points: Points, derivatives: int, *, kink: float | None, subtract: bool, error: float, lowest: float) -> LoopRule:
    s = points.s[: derivatives + 1]
    surface = np.zeros(0), np.zeros(0), np.zeros((len(s), 0))
    if kink is not None and len(s) > 2:
        at_kink = np.zeros((len(s), 1))
        at_kink[1, 0], at_kink[2, 0] = kink / 2, -kink
        surface = np.ones(1), np.ones(1), at_kink
    return LoopRule(
        y=points.y, weight=points.weight, s=s, surface_y=surface[0], surface_weight=surface[1],
        surface_s=surface[2], subtract=subtract, error=error, lowest=lowest,
    )
