"""Fine reference discretisations of integral_0^inf dy y^(d/2-1) F: many panels, no economy.

Economical rules (`frg.regulator.quadrature`) are made from them and measured against them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from frg.errors import InputError
from frg.regulator.tables import Table

DEEPEST = -0.9  # masses w down to DEEPEST * min P are resolved
NODES = 20  # a panel
FEWER = 13  # a panel of the discretisation that the fine one is checked with
NEGLIGIBLE = 1e-19  # tail of an integrand that is cut, relative to its largest value


@dataclass(frozen=True, kw_only=True, eq=False)
class Points:
    """`y`, `weight` (m,), y^(d/2-1) included; `s` (j+1, m)."""

    y: np.ndarray
    weight: np.ndarray
    s: np.ndarray

    def between(self, low: float, high: float) -> Points:
        inside = (self.y > low) & (self.y < high)
        return Points(y=self.y[inside], weight=self.weight[inside], s=self.s[:, inside])


@lru_cache(maxsize=256)
def jacobi(count: int, left: float, right: float) -> tuple[np.ndarray, np.ndarray]:
    """Nodes and weights on (0, 1) for the weight x^left (1-x)^right; both exponents > -1."""
    from scipy.special import beta, roots_jacobi

    x, w = roots_jacobi(count, right, left)
    return (x + 1) / 2, w * (beta(left + 1, right + 1) / w.sum())


def exponential_tail(table: Table, dimension: float) -> float:
    """Where y^(d/2) (|s| + y |s'|) has fallen to NEGLIGIBLE times its largest value."""
    y = np.geomspace(1e-6, 1e9, 400)
    s = table(y)[:2]
    size = y ** (dimension / 2) * (np.abs(s[0]) + y * np.abs(s[1]))
    large = np.flatnonzero(size > NEGLIGIBLE * size.max())
    last = int(large[-1])
    if last == len(y) - 1:
        raise InputError(
            "the regulator does not fall off fast enough for a loop integral",
            remedy="choose a shape that decays exponentially or like a high power of y",
        )
    return float(y[last + 1])


def compact_edges(
    table: Table, end: float, dip: float, lowest: float, *, smooth_end: bool, smooth_origin: bool = True
) -> list[float]:
    """Panels on [0, end] that resolve propagators of mass DEEPEST * lowest; graded towards an end where s is not
    smooth."""
    first = min(0.02 * end, _radius(table, 1e-9 * end, lowest), dip or end)
    if not smooth_origin:
        first = min(first, 1e-12 * end)
    edges = [0.0, *_geometric(first, end / 2 if not smooth_end else end)]
    if not smooth_end:
        edges += [end * (1 - 0.5 * 4.0**-k) for k in range(1, 17)] + [end]
    return _refined(table, sorted({*edges, *([dip] if 0 < dip < end else [])}), lowest)


def algebraic_edges(table: Table, dip: float, lowest: float, rise: float = 0.0) -> list[float]:
    """Panels on [0, 1e9] in units of the dip (or of min P), graded towards 0, where s grows like y^(-rise) or is
    not smooth, as far as y^rise matters."""
    unit = dip or lowest
    start = max(1e-13, min(0.02, 10 ** (-30 / rise))) if rise else 1e-13
    marks = [c * unit for c in (start, 0.03, 30.0, 1e9)]
    coarse = [0.0] + [y for low, high in zip(marks[:-1], marks[1:], strict=True) for y in _geometric(low, high)]
    return _refined(table, sorted({*coarse, *([dip] if dip else [])}), lowest, above=0.02 * unit)


def reference_points(
    table: Table, dimension: float, edges: list[float], *, count: int = NODES, fall: float | None = None, edge: float = 0.0
) -> Points:
    """Gauss-Legendre on every panel, Gauss-Jacobi on the first, where y^(d/2-1) may be singular; for integrands that
    fall like y^(-fall) a last panel beyond the last edge in 1/y; for integrands that go like (end - y)^edge,
    -1 < edge < 0, Gauss-Jacobi on the last panel."""
    ys: list[np.ndarray] = []
    weights: list[np.ndarray] = []
    for low, high in zip(edges[:-1], edges[1:], strict=True):
        right = edge if high == edges[-1] else 0.0
        if low == 0.0:
            x, w = jacobi(count, dimension / 2 - 1, right)
            ys.append(high * x)
            weights.append(high ** (dimension / 2) * w * (1 - x) ** (-right))
        else:
            x, w = jacobi(count, 0.0, right)
            y = low + (high - low) * x
            ys.append(y)
            weights.append((high - low) * w * (1 - x) ** (-right) * y ** (dimension / 2 - 1))
    if fall is not None:
        x, w = jacobi(count, fall - dimension / 2 - 1, 0.0)
        ys.append(edges[-1] / x[::-1])
        weights.append((edges[-1] ** (dimension / 2) * w * x ** (-fall))[::-1])
    y = np.concatenate(ys)
    return Points(y=y, weight=np.concatenate(weights), s=table(y))


def _geometric(low: float, high: float, ratio: float = 3.0) -> list[float]:
    count = max(1, math.ceil(math.log(high / low) / math.log(ratio)))
    return [float(v) for v in np.geomspace(low, high, count + 1)]


def _radius(table: Table, y: float, lowest: float) -> float:
    """About the distance from y to the nearest complex zero of P + w, w = DEEPEST * lowest, from P, P' and P''."""
    s = table(np.array([y]))[:, 0]
    value = max(y + s[0] + DEEPEST * lowest, 1e-3 * lowest)
    slope, curvature = abs(1 + s[1]), abs(s[2]) if len(s) > 2 else 0.0
    return float(2 * value / (slope + math.sqrt(slope**2 + 2 * curvature * value)))


def _refined(table: Table, edges: list[float], lowest: float, above: float = 0.0) -> list[float]:
    """Panels beyond `above` are halved until each is short against the distance to the nearest pole."""
    result = [edges[0]]
    waiting = edges[:0:-1]
    while waiting:
        low, high = result[-1], waiting[-1]
        wide = low > above and high - low > 1e-4 * high
        if wide and (high - low) / 2 > 0.8 * min(_radius(table, y, lowest) for y in (low, (low + high) / 2, high)):
            waiting.append((low + high) / 2)
        else:
            result.append(waiting.pop())
    return result
