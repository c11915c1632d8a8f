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
    """Genuine roots reached a second, orders 2..10, by frg and by the alternatives, from the same starts."""
    begun = time.perf_counter()
    search = polynomial_search(path, COMPARED)
    newton = BatchNewton(flow=search.flow, newton=search.settings.newton, batch=BATCH, known=1)
    newton.run(np.zeros((1, search.flow.size)), search.flow.active(2), search.args, np.zeros((0, search.flow.size)))
    prepared = time.perf_counter() - begun
    rows = [compared(search, newton, order) for order in COMPARED]
    return {"orders": rows, **totals(rows, prepared)}


def compared(search: PolynomialSearch, newton: BatchNewton, order: int) -> dict[str, Any]:
    """One order: frg on four full batches, the alternatives on the first starts of these."""
    import alternative

    active, scale = search.flow.active(order), np.asarray(search.args.scale)
    starts = search._random(np.random.default_rng([3, order]), 4 * BATCH, active)
    none = np.zeros((0, search.flow.size))
    begun = time.perf_counter()
    landing = newton.run(starts, active, search.args, none)
    seconds = time.perf_counter() - begun
    begun = time.perf_counter()
    newton.run(starts[:STARTS_COMPARED], active, search.args, none)
    same_seconds = time.perf_counter() - begun
    careful, plain = alternative.derive(order), alternative.derive_plainly(order)
    reached = alternative.in_loop_units((landing.unknowns * scale)[:, active])
    given = alternative.in_loop_units((starts[:STARTS_COMPARED] * scale)[:, active])
    exact = alternative.search(careful, given, exact_jacobian=True, referee=careful)
    differenced = alternative.search(careful, given, exact_jacobian=False, referee=careful)
    return {
        "order": order,
        "frg": side(len(starts), sum(careful.accepts(g) for g in reached), seconds),
        "plain": side_of(alternative.search(plain, given, exact_jacobian=False, referee=careful)),
        "careful": side_of(max(exact, differenced, key=lambda s: s.converged / s.seconds)),
        "frg, the same starts": same_seconds,
        "plain derivation": plain.seconds, "careful derivation": careful.seconds,
        "careful Jacobian": careful.jacobian_seconds,
        "careful derive and solve": careful.seconds + min(
            careful.jacobian_seconds + exact.seconds, differenced.seconds
        ),
    }


def side(starts: int, converged: int, seconds: float) -> dict[str, float]:
    return {"starts": starts, "converged": converged, "seconds": seconds, "a second": converged / seconds}


def side_of(searched: Any) -> dict[str, float]:
    return side(searched.starts, searched.converged, searched.seconds)


def totals(rows: list[dict[str, Any]], prepared: float) -> dict[str, float]:
    """Over all orders: roots a second, and seconds to derive, compile and run the same starts."""
    def rate(who: str) -> float:
        return sum(r[who]["converged"] for r in rows) / sum(r[who]["seconds"] for r in rows)

    def total(key: str) -> float:
        return float(sum(row[key] for row in rows))

    found = {f"roots a second, {who}": rate(who) for who in ("frg", "plain", "careful")}
    for who in ("plain", "careful"):
        found[f"throughput ratio, {who}"] = rate("frg") / rate(who)
    return found | {
        "frg: derive and compile": prepared,
        "derive and solve, frg": prepared + total("frg, the same starts"),
        "derive and solve, plain": total("plain derivation") + sum(r["plain"]["seconds"] for r in rows),
        "derive and solve, careful": total("careful derive and solve"),
    }
