"""The one-parameter ladder: all real fixed points of a potential expanded about a number.

About x = 0 (or wherever the flow's highest derivative is multiplied by a vanishing coordinate) the k-th Taylor
equation of a fixed point fixes the coupling k+1 linearly, so that the whole tower follows from the
first coupling sigma. What is left is one equation F(sigma) = 0, the last one, whose real roots are
bracketed on a dense grid of sigma and refined: the complete set up to the resolution of that grid.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from frg.evaluate.flow import Arguments, Flow
from frg.evaluate.jaxload import load
from frg.evaluate.taylor import Taylor


def has_ladder(flow: Flow) -> bool:
    """True for one function of one coordinate expanded about a number, without couplings of their own,
    anomalous dimension, or constant term among the unknowns."""
    block = flow.block
    return (
        isinstance(block, Taylor) and not block.moving and len(block.coordinates) == 1
        and len(block.functions) == 1 and not block.functions[0].constant
        and not flow.couplings and not flow.equations.anomalous and block.about == (0.0,)
        and all(max(o) <= 2 for o in flow.equations.functions[0].jets)
    )


@dataclass(frozen=True, kw_only=True)
class LadderScan:
    """Region of sigma in units of its natural scale, the number of grid points, and halvings per root."""

    low: float
    high: float
    points: int
    halvings: int


@dataclass(frozen=True, kw_only=True, eq=False)
class Ladder:
    """The compiled ladder of one flow; `last` = number of active couplings is an argument, so that one
    compilation serves all orders."""

    flow: Flow
    batch: int = 512

    @cached_property
    def _compiled(self) -> Any:
        jax = load().jax
        return jax.jit(jax.vmap(self._climb, in_axes=(0, None, None)))

    def _climb(self, sigma: Any, last: Any, args: Arguments) -> tuple[Any, Any]:
        """(F, c): scaled unknowns with rows 0 .. last-2 satisfied, and the residual of row last-1."""
        jnp, lax = load().numpy, load().lax
        n = self.flow.size
        rows = jnp.arange(n)

        def row(c: Any, k: Any) -> Any:
            return self.flow.right_side(c * args.scale, args)[k] / args.scale[k]

        def step(k: Any, c: Any) -> Any:
            off, on = row(c, k - 1), row(c + (rows == k), k - 1)
            return jnp.where(rows == k, -off / (on - off), c)

        start = jnp.where(rows == 0, sigma, 0.0)
        c = lax.fori_loop(1, n, lambda k, c: jnp.where(k < last, step(k, c), c), start)
        return row(c, last - 1), c

    def climb(self, sigmas: np.ndarray, last: int, args: Arguments) -> tuple[np.ndarray, np.ndarray]:
        """F (S,) and scaled unknowns (S, n) for an array of sigma."""
        jnp = load().numpy
        values, unknowns = [], []
        for first in range(0, len(sigmas), self.batch):
            piece = sigmas[first : first + self.batch]
            padded = np.concatenate([piece, np.repeat(piece[:1], self.batch - len(piece))])
            F, c = self._compiled(jnp.asarray(padded), last, args)
            values.append(np.asarray(F)[: len(piece)])
            unknowns.append(np.asarray(c)[: len(piece)])
        return np.concatenate(values), np.concatenate(unknowns)

    def roots(self, last: int, args: Arguments, scan: LadderScan) -> np.ndarray:
        """(K, n) scaled unknowns of all fixed points bracketed in the region, by rising sigma."""
        grid = sigma_grid(scan)
        F, _ = self.climb(grid, last, args)
        finite = np.isfinite(F)
        change = np.flatnonzero(finite[:-1] & finite[1:] & (np.sign(F[:-1]) * np.sign(F[1:]) < 0))
        exact = grid[finite & (F == 0)]
        low, high, at_low = grid[change], grid[change + 1], F[change]
        for _ in range(scan.halvings if len(low) else 0):
            middle = (low + high) / 2
            value, _ = self.climb(middle, last, args)
            left = np.sign(value) * np.sign(at_low) < 0
            high = np.where(left, middle, high)
            low, at_low = np.where(left, low, middle), np.where(left, at_low, value)
        found = np.sort(np.concatenate([exact, (low + high) / 2]))
        return self.climb(found, last, args)[1] if len(found) else np.zeros((0, self.flow.size))


    def genuine(self, sigmas: np.ndarray, last: int, args: Arguments) -> np.ndarray:
        """(K,) True where F has one sign on either side of a bracketed root at several distances: where
        rounding errors dominate F the signs are random. Roots closer together than 1e-9 relative fail too."""
        steps = np.array([1e-9, 3e-9, 1e-8, 3e-8])
        size = np.maximum(np.abs(sigmas), 1e-3 * np.max(np.abs(sigmas), initial=0.0) + 1e-300)
        shifts = size[:, None] * steps[None, :]
        sides = []
        for side in (-1, 1):
            values, _ = self.climb((sigmas[:, None] + side * shifts).ravel(), last, args)
            sides.append(np.sign(values.reshape(shifts.shape)))
        below, above = sides
        steady = (below == below[:, :1]).all(axis=1) & (above == above[:, :1]).all(axis=1)
        return steady & (below[:, 0] * above[:, 0] < 0)


def sigma_grid(scan: LadderScan) -> np.ndarray:
    """Dense near the lower end and around zero, where high orders crowd their roots; 0 is a point of it."""
    third = scan.points // 3
    even = np.linspace(scan.low, scan.high, scan.points - 2 * third)
    lower = scan.low + (scan.high - scan.low) * np.geomspace(1e-6, 1, third)
    around = np.geomspace(1e-6, 1, third // 2)
    both = np.concatenate([scan.low * around, [0.0], scan.high * around])
    return np.unique(np.clip(np.concatenate([even, lower, both]), scan.low, scan.high))
