"""Kill a study twenty times at random moments; every committed step must be readable and resuming change nothing.

    python tests/benchmarks/kill_twenty.py [--kills 20] [--number 1]

Every other moment is drawn between the start of computing (the run file is there) and a little after the expected
end; most of that is compilation, so the others are drawn from the time after the first committed step.
Exit code 1 if anything was lost, damaged or changed. The test suite does the same with three kills.
"""

from __future__ import annotations

import argparse
import os
import random
import signal
import subprocess
import sys
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent.parent
sys.path.insert(0, str(ROOT))

from frg.store.checking import check_run  # noqa: E402
from frg.store.compare import differences  # noqa: E402
from frg.store.hdf5 import read_run  # noqa: E402

ORDERS = "2..9"
IGNORED = frozenset({"seconds", "command", "created_utc"})


def converge(path: Path, environment: dict[str, str], *more: str) -> subprocess.Popen[str]:
    file = str(ROOT / "truncations" / "ising_lpa.toml")
    return subprocess.Popen(
        [sys.executable, "-m", "frg.cli", "converge", file, "--orders", ORDERS, "--quiet", *more],
        env=environment, cwd=path.parent, text=True, stdout=subprocess.PIPE, stderr=subprocess.PIPE,
    )


def finish(process: subprocess.Popen[str]) -> str:
    """Wait; the message of a process that failed, or nothing."""
    _, err = process.communicate(timeout=600)
    return "" if process.returncode == 0 else f"exit code {process.returncode}: {err.strip()}"


def started(path: Path, process: subprocess.Popen[str], steps: int = 0) -> None:
    """Wait for the run file and so many steps in it."""
    while not path.exists() or len(read_run(path).steps) < steps:
        if process.poll() is not None:
            raise SystemExit(f"the study ended before its run file was there: {process.communicate()[1]}")
        time.sleep(0.01)


def kill_once(
    folder: Path, environment: dict[str, str], whole: Path, steps: int, delay: float
) -> tuple[str, list[str]]:
    """(what was seen, what was wrong) of one kill, `delay` seconds after so many steps were committed."""
    path = folder / "run.h5"
    process = converge(path, environment, "--save", str(path))
    started(path, process, steps)
    time.sleep(delay)
    process.send_signal(signal.SIGKILL)
    process.communicate()
    wrong = []
    kept, reference = read_run(path), read_run(whole)
    for mine, theirs in zip(kept.steps, reference.steps, strict=False):
        wrong += differences(mine, theirs, ignoring=IGNORED)
    wrong += [f"{c.name}: {c.detail}" for c in check_run(path).checks if c.passed is False]
    if kept.status != "complete":
        message = finish(converge(path, environment, "--resume", str(path)))
        wrong += [message] if message else []
    wrong += differences(read_run(path), reference, ignoring=IGNORED)
    left = sorted(p.name for p in folder.iterdir() if p.name != "run.h5")
    litter = f", also left: {', '.join(left)}" if left else ""
    since = "the first step" if steps else "the start"
    count = f"{len(kept.steps)} of {len(reference.steps)} steps kept ({kept.status})"
    return f"killed {delay:.2f} s after {since}, {count}{litter}", wrong


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--kills", type=int, default=20)
    parser.add_argument("--number", type=int, default=1, help="starts the generator of the moments")
    options = parser.parse_args()
    rng = random.Random(options.number)
    failures = 0
    with tempfile.TemporaryDirectory() as name:
        top = Path(name)
        paths = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")]).rstrip(os.pathsep)
        environment = {**os.environ, "FRG_CACHE": str(top / "cache"), "PYTHONPATH": paths}
        whole = top / "whole.h5"
        for _ in range(2):  # the first fills the compilation cache, the second tells the time a study takes
            whole.unlink(missing_ok=True)
            process = converge(whole, environment, "--save", str(whole))
            started(whole, process)
            begun = time.perf_counter()
            if message := finish(process):
                raise SystemExit(f"the uninterrupted study failed: {message}")
            seconds = time.perf_counter() - begun
        run = read_run(whole)
        later = sum(step.seconds for step in run.steps[1:])
        print(f"uninterrupted study, orders {ORDERS}: {seconds:.2f} s, {later:.2f} s of it after the first step")
        for turn in range(options.kills):
            folder = top / f"kill-{turn}"
            folder.mkdir()
            steps, window = (0, seconds) if turn % 2 == 0 else (1, later)
            seen, wrong = kill_once(folder, environment, whole, steps, rng.uniform(0.0, 1.05 * window))
            failures += bool(wrong)
            print(f"{turn + 1:>3}: {seen}; {'resumed to the same result' if not wrong else 'WRONG: ' + '; '.join(wrong[:3])}",
                  flush=True)
    print(f"{options.kills} kills, {options.kills - failures} survived with the same result, {failures} failed")
    return 1 if failures else 0


if __name__ == "__main__":
    sys.exit(main())
