"""Damped, deflated Newton iteration, vectorised over starts in one compiled program."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any, NamedTuple

import numpy as np

from frg.evaluate.flow import Arguments, Flow
from frg.evaluate.jaxload import load
from frg.solve.linear import solve_small


class Landing(NamedTuple):
    """Where the iteration of every start ended: scaled unknowns (S, n), the last full Newton step
    relative to the size of the unknowns (S,), iterations used (S,)."""

    unknowns: np.ndarray
    step: np.ndarray
    iterations: np.ndarray


@dataclass(frozen=True, kw_only=True)
class Newton:
    """Settings of the iteration: at most `iterations` steps, each halved up to `halvings` times until the
    residual falls; finished when the relative step is below `step`."""

    iterations: int
    halvings: int
    step: float


@dataclass(frozen=True, kw_only=True, eq=False)
class BatchNewton:
    """The compiled iteration for one flow: `batch` starts at a time, at most `known` deflated roots.

    Deflation (P. Farrell, A. Birkisson, S. Funke, SIAM J. Sci. Comput. 37 (2015) A2026): the residual is
    multiplied by m(c) = prod_k (1 + 1/|c - c_k|^2). Newton's step for m F is Newton's step p for F times
    1/(1 - grad(ln m).p) by the Sherman-Morrison formula, so no derivative of the product is formed."""

    flow: Flow
    newton: Newton
    batch: int
    known: int

    @cached_property
    def _compiled(self) -> Any:
        jax = load().jax
        return jax.jit(jax.vmap(self._iterate, in_axes=(0, None, None, None, None)))

    def run(self, starts: np.ndarray, active: np.ndarray, args: Arguments, roots: np.ndarray) -> Landing:
        """Iterate from `starts` (S, n), S arbitrary, deflating `roots` (K, n)."""
        jnp = load().numpy
        known = np.zeros((self.known, self.flow.size))
        used = np.zeros(self.known, dtype=bool)
        kept = roots[-self.known:]
        known[: len(kept)], used[: len(kept)] = kept, True
        parts = []
        for first in range(0, len(starts), self.batch):
            piece = starts[first : first + self.batch]
            padded = np.concatenate([piece, np.repeat(piece[:1], self.batch - len(piece), axis=0)])
            found = self._compiled(jnp.asarray(padded), jnp.asarray(active), args, jnp.asarray(known), jnp.asarray(used))
            parts.append([np.asarray(x)[: len(piece)] for x in found])
        if not parts:
            return Landing(np.zeros((0, self.flow.size)), np.zeros(0), np.zeros(0, dtype=int))
        return Landing(*(np.concatenate(column) for column in zip(*parts, strict=True)))

    def _iterate(self, start: Any, active: Any, args: Arguments, known: Any, used: Any) -> Any:
        jax, jnp, lax = load()
        newton = self.newton

        def log_multiplier(c: Any) -> Any:
            distance = jnp.sum((c - known) ** 2, axis=1)
            return jnp.sum(jnp.where(used, jnp.log1p(1 / jnp.where(used, distance, 1.0)), 0.0))

        def residual(c: Any) -> Any:
            return self.flow.residual(c, active, args)

        def advance(state: Any) -> Any:
            c, _, count = state
            value, jacobian = self.flow.linearised_residual(c, active, args)
            # rows in units of their own response, so that the norm does not depend on how equations are scaled
            weight = 1 / jnp.maximum(jnp.sum(jnp.abs(jacobian), axis=1), 1e-300)
            p = solve_small(jacobian * weight[:, None], -value * weight)
            bend = jnp.sum(jax.grad(log_multiplier)(c) * p)
            deflated = p / jnp.where(jnp.abs(1 - bend) < 1e-3, 1e-3, 1 - bend)
            fractions = 0.5 ** jnp.arange(newton.halvings + 1)
            tried = c + fractions[:, None] * deflated
            values = jax.vmap(residual)(tried)
            log_norm = jnp.log(jnp.max(jnp.abs(values * weight), axis=1)) + jax.vmap(log_multiplier)(tried)
            best = jnp.argmin(jnp.where(jnp.isfinite(log_norm) | (log_norm == -jnp.inf), log_norm, jnp.inf))
            relative = jnp.max(jnp.abs(p)) / (1e-6 + jnp.max(jnp.abs(c)))
            return tried[best], relative, count + 1

        def unfinished(state: Any) -> Any:
            c, relative, count = state
            return (count < newton.iterations) & (relative > newton.step) & jnp.all(jnp.isfinite(c))

        return lax.while_loop(unfinished, advance, (start, jnp.asarray(jnp.inf), 0))
