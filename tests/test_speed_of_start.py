"""Commands that compute nothing start quickly because they import little. Times are measured by the benchmarks."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

HEAVY = ("jax", "jaxlib", "sympy", "scipy", "matplotlib", "flint", "jinja2")
CODE = """
import contextlib, io, json, sys
from frg.cli.main import main
with contextlib.redirect_stdout(io.StringIO()) as said:
    try:
        code = main(sys.argv[1:])
    except SystemExit as done:
        code = done.code
print(json.dumps({"code": code, "said": said.getvalue(), "modules": sorted(sys.modules)}))
"""


def started(arguments: list[str], folder: Path) -> dict:
    done = subprocess.run(
        [sys.executable, "-c", CODE, *arguments], cwd=folder, capture_output=True, text=True, timeout=60, check=True,
        env={"PYTHONPATH": str(Path(__file__).resolve().parent.parent), "PATH": ""},
    )
    return json.loads(done.stdout)


@pytest.mark.parametrize("arguments", [["--help"], ["converge", "--help"], ["runs"], ["runs", "--json"], ["truncations"]])
def test_commands_that_compute_nothing_import_nothing_heavy(arguments: list[str], tmp_path: Path) -> None:
    found = started(arguments, tmp_path)
    assert found["code"] == 0 and found["said"]
    assert not {name.partition(".")[0] for name in found["modules"]} & set(HEAVY)


def test_help_and_an_empty_list_of_runs_do_not_even_import_numpy_or_h5py(tmp_path: Path) -> None:
    loaded = set(started(["--help"], tmp_path)["modules"])
    assert not loaded & {"numpy", "h5py", "rich", "tomllib"}


def test_listing_stored_runs_reads_them_without_the_computing_libraries(tmp_path: Path, shelf: Path) -> None:
    from frg.cli.main import main

    assert main(["solve", str(shelf / "one_coupling.toml"), "--quiet", "--save", str(tmp_path / "runs" / "one.h5")]) == 0
    found = started(["runs"], tmp_path)
    assert found["code"] == 0 and "one.h5" in found["said"] and "complete" in found["said"]
    assert not {name.partition(".")[0] for name in found["modules"]} & set(HEAVY)


def test_the_measure_itself_sees_heavy_modules(tmp_path: Path, shelf: Path) -> None:
    found = started(["equations", str(shelf / "one_coupling.toml")], tmp_path)
    assert found["code"] == 0 and "sympy" in found["modules"]
