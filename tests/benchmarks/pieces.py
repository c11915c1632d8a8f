"""Timed pieces inside one process: evaluations, batches of Newton starts, and the comparison with the alternative."""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

from frg.cli.settings import search_settings
from frg.derive.flow import derive_flow
from frg.evaluate.jaxload import load
from frg.language.reader import read_truncation
from frg.regulator.build import build_regulator
from frg.solve.newton import BatchNewton
from frg.solve.search import PolynomialSearch

BATCH = 512
STARTS = 10_000
COMPARED = tuple(range(2, 11))
STARTS_COMPARED = 200  # an order, for the alternative; frg gets these and further ones up to a full batch


def polynomial_search(path: Path, orders: tuple[int, ...]) -> PolynomialSearch:
    """Derivation, discretisation and search of a truncation file, nothing compiled yet."""
    truncation = read_truncation(path)
    equations = derive_flow(truncation, build_regulator(truncation.regulator))
    return PolynomialSearch(equations=equations, orders=orders, settings=search_settings(thorough=False))


def repeated(action: Callable[[], Any], times: int) -> float:
    """Median seconds of one call."""
    seconds = []
    for _ in range(times):
        begun = time.perf_counter()
        action()
        seconds.append(time.perf_counter() - begun)
    return float(np.median(seconds))


def evaluations(path: Path) -> dict[str, float]:
    """Seconds of one compiled residual, and residual with Jacobian, at order 20; alone and within a batch."""
    jax, jnp, _ = load()
    search = polynomial_search(path, (20,))
    flow, args = search.flow, search.args
    active = jnp.asarray(flow.active(20))
    rng = np.random.default_rng(1)
    points = jnp.asarray(search._random(rng, BATCH, np.asarray(active)))

    def both(c: Any, args: Any) -> Any:
        return flow.residual(c, active, args), jax.jacfwd(lambda c: flow.residual(c, active, args))(c)

    found = {}
    for name, function in (("residual", lambda c, args: flow.residual(c, active, args)), ("residual and Jacobian", both)):
        single = jax.jit(function)
        batched = jax.jit(jax.vmap(function, in_axes=(0, None)))
        jax.block_until_ready((single(points[0], args), batched(points, args)))
        found[f"one {name}, order 20"] = repeated(lambda f=single: jax.block_until_ready(f(points[0], args)), 200)
        found[f"one {name}, order 20, within {BATCH}"] = (
            repeated(lambda f=batched: jax.block_until_ready(f(points, args)), 20) / BATCH
        )
    return found


def newton_starts(path: Path) -> dict[str, float]:
    """10 000 starts at order 8: seconds of the first batch (compilation) and of all, and how many converged."""
    search = polynomial_search(path, (8,))
    newton = BatchNewton(flow=search.flow, newton=search.settings.newton, batch=BATCH, known=1)
    active = search.flow.active(8)
    starts = search._random(np.random.default_rng(2), STARTS, active)
    none = np.zeros((0, search.flow.size))
    begun = time.perf_counter()
    newton.run(starts[:1], active, search.args, none)
    compiled = time.perf_counter() - begun
    begun = time.perf_counter()
    landing = newton.run(starts, active, search.args, none)
    seconds = time.perf_counter() - begun
    good = np.isfinite(landing.unknowns).all(axis=1) & (landing.step < 1e-7)
    return {"compilation": compiled, "seconds": seconds, "starts": STARTS, "converged": int(good.sum())}


def throughput(path: Path) -> dict[str, Any]:
    """Genuine roots reached a second, orders 2..10, by frg and by the alternative, from the same starts."""
    import alternative

    begun = time.perf_counter()
    search = polynomial_search(path, COMPARED)
    newton = BatchNewton(flow=search.flow, newton=search.settings.newton, batch=BATCH, known=1)
    none = np.zeros((0, search.flow.size))
    newton.run(np.zeros((1, search.flow.size)), search.flow.active(2), search.args, none)
    prepared = time.perf_counter() - begun
    scale = np.asarray(search.args.scale)
    rows = []
    for order in COMPARED:
        active = search.flow.active(order)
        starts = search._random(np.random.default_rng([3, order]), 4 * BATCH, active)
        begun = time.perf_counter()
        landing = newton.run(starts, active, search.args, none)
        seconds = time.perf_counter() - begun
        begun = time.perf_counter()
        newton.run(starts[:STARTS_COMPARED], active, search.args, none)
        same_seconds = time.perf_counter() - begun
        derived = alternative.derive(order)
        reached = alternative.in_loop_units((landing.unknowns * scale)[:, active])
        converged = sum(derived.accepts(g) for g in reached)
        given = alternative.in_loop_units((starts[:STARTS_COMPARED] * scale)[:, active])
        by_jacobian = {
            exact: alternative.search(derived, given, exact_jacobian=exact) for exact in (True, False)
        }
        best = max(by_jacobian.values(), key=lambda s: s.converged / s.seconds)
        rows.append({
            "order": order, "frg starts": len(starts), "frg converged": converged, "frg seconds": seconds,
            "frg seconds for the same starts": same_seconds,
            "alternative starts": best.starts, "alternative converged": best.converged,
            "alternative seconds": best.seconds,
            "alternative derivation": derived.seconds, "alternative Jacobian": derived.jacobian_seconds,
            "alternative had exact Jacobian": best is by_jacobian[True],
            "alternative derive and solve": derived.seconds + min(
                derived.jacobian_seconds + by_jacobian[True].seconds, by_jacobian[False].seconds
            ),
            "ratio": (converged / seconds) / max(best.converged / best.seconds, 1e-300),
        })
    return {"orders": rows, **totals(rows, prepared)}


def totals(rows: list[dict[str, Any]], prepared: float) -> dict[str, float]:
    """Over all orders: roots a second, and seconds to derive, compile and run the same starts."""
    def total(key: str) -> float:
        return float(sum(row[key] for row in rows))

    mine = total("frg converged") / total("frg seconds")
    theirs = total("alternative converged") / total("alternative seconds")
    same = total("frg seconds for the same starts")
    return {
        "frg roots a second": mine, "alternative roots a second": theirs, "throughput ratio": mine / theirs,
        "smallest ratio at one order": min(row["ratio"] for row in rows),
        "frg preparation": prepared, "frg derive and solve": prepared + same,
        "alternative derive and solve": total("alternative derive and solve"),
    }
