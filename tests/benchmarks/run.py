"""Benchmarks: whole studies, start-up, evaluations, Newton starts, and the same work with sympy and scipy.

"plain" and "careful" are the two versions of `alternative.py`; "frg" is one compiled program padded for all orders.

    python tests/benchmarks/run.py [--json PATH]

prints a table and then the same numbers as one JSON object (with --json into a file instead). Nothing here
decides a pass or a fail; other work on the machine moves the absolute times, so read the ratios.
"""

from __future__ import annotations

import argparse
import json
import os
import platform
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parent.parent.parent
FILE = ROOT / "truncations" / "ising_lpa.toml"
ORDERS = "2..20"
MUST_KNOW = {"nu": 0.6495617727899, "source": "computed independently, order 20 (flat regulator, d = 3)"}


def frg(arguments: list[str], folder: Path, environment: dict[str, str]) -> tuple[float, str]:
    """(wall seconds, standard output) of one command in a process of its own."""
    begun = time.perf_counter()
    done = subprocess.run(
        [sys.executable, "-m", "frg.cli", *arguments], cwd=folder, env=environment, check=True,
        capture_output=True, text=True,
    )
    return time.perf_counter() - begun, done.stdout


def commands() -> dict[str, Any]:
    """Whole commands as a user sees them: imports, compilation, writing of the run included."""
    found: dict[str, Any] = {}
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        paths = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")]).rstrip(os.pathsep)
        environment = {**os.environ, "FRG_CACHE": str(folder / "cache"), "PYTHONPATH": paths}
        study = ["converge", str(FILE), "--orders", ORDERS, "--json"]
        for label in ("cold", "warm"):
            found[f"converge {ORDERS}, {label}"], out = frg(study, folder, environment)
            track = json.loads(out)["tracks"][0]
            last = json.loads(out)["steps"][track["steps"][-1]]["fixed_points"][track["points"][-1]]
            found[f"nu at order 20, {label}"] = 1 / last["theta"][0][0]
        for arguments in (["--help"], ["runs"], ["show", "2", "--json"], ["equations", str(FILE)]):
            if arguments[0] == "show":
                arguments = ["show", str(next((folder / "runs").glob("*.h5"))), "--json"]
            seconds = sorted(frg(arguments, folder, environment)[0] for _ in range(5))
            found[f"frg {arguments[0]}"] = seconds[2]
    return found


def rows_of(result: dict[str, Any]) -> list[tuple[str, str]]:
    """The table: what was measured, with its unit."""
    rows = [(name, _number(value)) for name, value in result["commands"].items()]
    rows += [(name, f"{1e6 * value:.1f} us") for name, value in result["evaluations"].items()]
    newton = result["newton starts, order 8"]
    rows.append((f"{newton['starts']} Newton starts, order 8", f"{newton['seconds']:.3f} s"))
    rows.append(("  of these converged", f"{newton['converged']}"))
    rows.append(("  compilation before", f"{newton['compilation']:.2f} s"))
    against = result["against sympy and scipy"]
    rows += [(name, f"{value:.4g}") for name, value in against.items() if name != "orders"]
    return rows


def _number(value: float) -> str:
    return f"{value:.13f}" if 0.64 < value < 0.66 else f"{value:.2f} s"


def order_table(rows: list[dict[str, Any]]) -> str:
    """Side by side by order: genuine roots reached of so many starts, and roots a second."""
    names = ("frg", "plain", "careful")
    lines = ["roots reached (a second)",
             f"{'order':>5}" + "".join(f"{name:>24}" for name in names) + f"{'frg/plain':>12}{'frg/careful':>12}"]
    for r in rows:
        cells = [f"{r[n]['converged']}/{r[n]['starts']} ({r[n]['a second']:.4g})" for n in names]
        ratios = [r["frg"]["a second"] / max(r[n]["a second"], 1e-300) for n in names[1:]]
        lines.append(f"{r['order']:>5}" + "".join(f"{c:>24}" for c in cells) + "".join(f"{x:>12.1f}" for x in ratios))
    return "\n".join(lines)


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--json", metavar="PATH", help="write the JSON object there instead of printing it")
    options = parser.parse_args()
    sys.path.insert(0, str(ROOT))
    result: dict[str, Any] = {
        "machine": {"cores": os.cpu_count(), "python": platform.python_version(), "load": os.getloadavg()[0]},
        "reference": MUST_KNOW, "commands": commands(),
    }
    with tempfile.TemporaryDirectory() as cache:
        os.environ["FRG_CACHE"] = cache  # compilation inside this process is timed from an empty cache
        import pieces

        result["evaluations"] = pieces.evaluations(FILE)
        result["newton starts, order 8"] = pieces.newton_starts(FILE)
        result["against sympy and scipy"] = pieces.throughput(FILE)
    for name, value in rows_of(result):
        print(f"{name:<52} {value:>16}")
    print()
    print(order_table(result["against sympy and scipy"]["orders"]))
    if options.json:
        Path(options.json).write_text(json.dumps(result, indent=1) + "\n", encoding="utf-8")
    else:
        print(json.dumps(result))
    return 0


if __name__ == "__main__":
    sys.exit(main())
