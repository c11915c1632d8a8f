"""Small dense linear systems inside vectorised jax code.

Own elimination instead of batched LAPACK: jax 0.10 can deadlock in batched library calls when the
machine has two cores, and for the sizes here (n <= 40) the cost is comparable.
"""

from __future__ import annotations

from typing import Any

from frg.evaluate.jaxload import load


def solve_small(matrix: Any, rhs: Any) -> Any:
    """x of matrix @ x = rhs, (n, n) and (n,), by Gaussian elimination with row pivoting.

    A singular matrix gives non-finite entries; the caller checks."""
    jnp, lax = load().numpy, load().lax
    n = matrix.shape[0]
    work = jnp.concatenate([matrix, rhs[:, None]], axis=1)
    rows = jnp.arange(n)

    def eliminate(k: Any, work: Any) -> Any:
        column = jnp.where(rows >= k, jnp.abs(work[:, k]), -1.0)
        pivot = jnp.argmax(column)
        order = jnp.where(rows == k, pivot, jnp.where(rows == pivot, k, rows))
        work = work[order]
        head = work[k] / work[k, k]
        factor = jnp.where(rows == k, 0.0, work[:, k])
        return (work - factor[:, None] * head[None, :]).at[k].set(head)

    return lax.fori_loop(0, n, eliminate, work)[:, n]
