"""Benchmarks of f(R): whole studies, one residual with its Jacobian, and the same orders with sympy series and mpmath.

    python tests/benchmarks/gravity.py [--json PATH] [--short]

The alternative is what a notebook does: the flow equation as a sympy expression, f a polynomial with symbolic
coefficients, both sides expanded in R, and mpmath.findroot from the solution of the order before. It is stopped after
`BUDGET` seconds. Nothing here decides a pass or a fail: read the ratios.
"""

from __future__ import annotations

import argparse
import json
import os
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

import mpmath
import numpy as np
import sympy

sys.path.insert(0, str(Path(__file__).resolve().parent.parent.parent))

from tests.benchmarks.run import ROOT, frg

FILE = ROOT / "truncations" / "f_of_r.toml"
BUDGET = 60.0
START = (5.184e-3, -19.596e-3, 0.702e-3, -9.682e-3)


def studies(uptos: tuple[int, ...]) -> dict[str, Any]:
    """Whole commands in processes of their own, nothing cached before."""
    found: dict[str, Any] = {}
    for upto in uptos:
        with tempfile.TemporaryDirectory() as name:
            folder = Path(name)
            paths = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")]).rstrip(os.pathsep)
            environment = {**os.environ, "FRG_CACHE": str(folder / "cache"), "PYTHONPATH": paths}
            seconds, out = frg(["converge", str(FILE), "--orders", f"2..{upto}", "--json"], folder, environment)
            result = json.loads(out)
            track = result["tracks"][0]
            points = [result["steps"][s]["fixed_points"][p] for s, p in zip(track["steps"], track["points"], strict=True)]
            found[f"orders 2..{upto}"] = {
                "seconds": seconds, "counts": sorted({p["relevant"] for p in points}), "orders followed": len(points),
                "largest residual": max(p["residual"] for p in points), "condition at the end": points[-1]["condition"],
                "run file, MB": sum(p.stat().st_size for p in folder.rglob("*.h5")) / 1e6,
            }
    return found


def derived() -> Any:
    from frg.cli.problem import read_problem

    return read_problem(str(FILE), (), None).equations


def one_evaluation(order: int) -> dict[str, float]:
    """Residual and Jacobian at one order: from the flow's own slopes, and by automatic differentiation."""
    from frg.evaluate.build import build_flow, flow_arguments
    from frg.evaluate.jaxload import load

    jax, jnp, _ = load()
    flow = build_flow(derived(), (order,))
    args = flow_arguments(flow)
    active = flow.active(order)
    g = np.zeros(flow.size)
    g[:4] = START
    c = jnp.asarray(g / np.asarray(args.scale))
    found = {}
    ways = {
        "slopes": jax.jit(lambda c: flow.linearised_residual(c, active, args)),
        "automatic differentiation": jax.jit(
            lambda c: (flow.residual(c, active, args), jax.jacfwd(lambda c: flow.residual(c, active, args))(c))
        ),
    }
    for name, function in ways.items():
        begun = time.perf_counter()
        jax.block_until_ready(function(c))
        found[f"{name}, compilation"] = time.perf_counter() - begun
        times = []
        for _ in range(20):
            begun = time.perf_counter()
            jax.block_until_ready(function(c))
            times.append(time.perf_counter() - begun)
        found[name] = float(np.median(times))
    return found


def notebook(upto: int) -> list[dict[str, float]]:
    """Order by order with sympy.series and mpmath.findroot, until the budget is spent."""
    flow = derived().functions[0]
    R = sympy.Symbol("R")
    known, rows = list(START), []
    begun = time.perf_counter()
    for order in range(3, upto + 1):
        first = time.perf_counter()
        g = sympy.symbols(f"g0:{order + 1}")
        f = sum(c * R**n for n, c in enumerate(g))
        jets = {sympy.Symbol(f"f{{{k}}}"): sympy.diff(f, R, k) for k in range(4)}
        still = {s: 0 for s in flow.rhs.free_symbols if s.name.startswith("d_t ")}
        expression = flow.rhs.subs(still).subs(jets)
        equations = [sympy.series(expression, R, 0, order + 1).removeO().expand().coeff(R, n) for n in range(order + 1)]
        derive = time.perf_counter() - first
        function = sympy.lambdify(g, equations, "mpmath")
        start = [*known, *[0.0] * (order + 1 - len(known))]
        root = mpmath.findroot(lambda *x, call=function: call(*x), start, tol=1e-20, verify=False)
        known = [float(x) for x in root]
        rows.append({"order": order, "derive": derive, "all": time.perf_counter() - first, "f0": known[0], "f1": known[1]})
        if time.perf_counter() - begun > BUDGET:
            break
    return rows


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--json", metavar="PATH")
    parser.add_argument("--short", action="store_true", help="leave out the study to order 70")
    options = parser.parse_args()
    result = {
        "studies": studies((35,) if options.short else (35, 70)), "one evaluation, order 70": one_evaluation(70),
        "sympy series and mpmath": notebook(12),
    }
    for name, row in result["studies"].items():
        print(name, {k: round(v, 14) if isinstance(v, float) else v for k, v in row.items()})
    for name, value in result["one evaluation, order 70"].items():
        print(f"order 70, {name}: {1e3 * value:.3f} ms")
    for row in result["sympy series and mpmath"]:
        print(f"notebook, order {row['order']:.0f}: {row['all']:.2f} s, f0 = {row['f0']:.9f}, f1 = {row['f1']:.9f}")
    if options.json:
        Path(options.json).write_text(json.dumps(result, indent=1), encoding="utf-8")


if __name__ == "__main__":
    main()
