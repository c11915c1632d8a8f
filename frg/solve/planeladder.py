"""The ladder with two free couplings: all fixed points at a low order in a stated box.

Where row k of the flow fixes the coupling k+2 linearly (a third-order equation with a regular singular point at the
point of expansion, as for f(R)), the tower follows from the first two couplings, and two residual functions of
two variables are left. They are evaluated on a grid; every cell over which neither has one sign is a start for
Newton's iteration on the whole system. Fixed points closer together than the spacing of the grid can be missed.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from frg.evaluate.flow import Arguments, Flow
from frg.evaluate.jaxload import load
from frg.solve.newton import BatchNewton


@dataclass(frozen=True, kw_only=True)
class PlaneScan:
    """Box of the first two couplings in their natural units, |c_0| < first and |c_1| < second, and grid points a side."""

    first: float
    second: float
    points: int


@dataclass(frozen=True, kw_only=True, eq=False)
class PlaneLadder:
    """The compiled tower of one flow."""

    flow: Flow
    newton: BatchNewton
    batch: int = 4096

    @cached_property
    def _compiled(self) -> Any:
        jax = load().jax
        return jax.jit(jax.vmap(self._climb, in_axes=(0, None, None)))

    def _climb(self, pair: Any, last: Any, args: Arguments) -> tuple[Any, Any]:
        """((F_1, F_2), c): rows 0 .. last-3 satisfied by c_2 .. c_(last-1), and the residuals of the last two."""
        jnp, lax = load().numpy, load().lax
        n = self.flow.size
        rows = jnp.arange(n)

        def right(c: Any) -> Any:
            return self.flow.right_side(c * args.scale, args) / args.scale

        def step(k: Any, c: Any) -> Any:
            off, on = right(c)[k - 2], right(c + (rows == k))[k - 2]
            return jnp.where((rows == k) & (k < last), -off / (on - off), c)

        start = jnp.where(rows == 0, pair[0], jnp.where(rows == 1, pair[1], 0.0))
        c = lax.fori_loop(2, n, step, start)
        b = right(c)
        return jnp.stack([b[last - 2], b[last - 1]]), c

    def climb(self, pairs: np.ndarray, last: int, args: Arguments) -> tuple[np.ndarray, np.ndarray]:
        """F (S, 2) and scaled unknowns (S, n)."""
        jnp = load().numpy
        values, unknowns = [], []
        for first in range(0, len(pairs), self.batch):
            piece = pairs[first : first + self.batch]
            padded = np.concatenate([piece, np.repeat(piece[:1], self.batch - len(piece), axis=0)])
            F, c = self._compiled(jnp.asarray(padded), last, args)
            values.append(np.asarray(F)[: len(piece)])
            unknowns.append(np.asarray(c)[: len(piece)])
        return np.concatenate(values), np.concatenate(unknowns)

    def roots(self, active: np.ndarray, args: Arguments, scan: PlaneScan) -> tuple[np.ndarray, int]:
        """((K, n) scaled unknowns where Newton's iteration ended, not yet told apart; cells that were tried)."""
        x = np.linspace(-scan.first, scan.first, scan.points)
        y = np.linspace(-scan.second, scan.second, scan.points)
        pairs = np.stack(np.meshgrid(x, y, indexing="ij"), axis=-1)
        F, c = self.climb(pairs.reshape(-1, 2), int(active.sum()), args)
        sign = np.sign(F).reshape(scan.points, scan.points, 2)
        corners = np.stack([sign[:-1, :-1], sign[1:, :-1], sign[:-1, 1:], sign[1:, 1:]])
        mixed = (corners.min(axis=0) <= 0) & (corners.max(axis=0) >= 0) | ~np.isfinite(corners).all(axis=0)
        cells = np.argwhere(mixed.all(axis=-1))
        starts = c.reshape(scan.points, scan.points, -1)[cells[:, 0], cells[:, 1]]
        starts = starts[np.isfinite(starts).all(axis=1)]
        landing = self.newton.run(starts, active, args, np.zeros((0, self.flow.size)))
        good = np.isfinite(landing.unknowns).all(axis=1) & (landing.step < 1e-7)
        inside = (np.abs(landing.unknowns[:, 0]) <= scan.first) & (np.abs(landing.unknowns[:, 1]) <= scan.second)
        return landing.unknowns[good & inside], len(starts)
