"""`frg check` evaluates stored fixed points afresh from the run file alone, whatever the kind of truncation."""

from __future__ import annotations

from pathlib import Path

import h5py
import pytest

KINDS = [
    ("on_lpa_prime.toml", ["--order", "4", "--set", "N=2"]),
    ("one_coupling.toml", ["--set", "A=1/3"]),
    ("two_order_parameters.toml", ["--order", "2"]),
    ("ising_lpa_grid.toml", []),
    ("ising_lpa.toml", ["--order", "3", "--regulator", "custom:a*exp(-y)*(1+b*y),a=1,b=0.1"]),
    ("ising_lpa.toml", ["--order", "3", "--regulator", "sharp"]),
]


@pytest.mark.parametrize("file, more", KINDS, ids=[" ".join([f, *m]) for f, m in KINDS])
def test_a_stored_solve_is_sound_and_a_changed_one_is_not(shell, shelf: Path, tmp_path: Path, file: str, more) -> None:
    assert shell("solve", shelf / file, *more, "--quiet", "--save", "run.h5") == 0
    assert shell("check", "run.h5") == 0, shell.out
    assert "exponents recomputed" in shell.out
    # the largest coupling of the last fixed point, which is not zero, moved by a part in a thousand
    with h5py.File(tmp_path / "run.h5", "r+") as stored:
        points = stored["steps/0000/fixed_points"]
        data = points[str(len(points) - 1)]["couplings"]
        values = data[()]
        index = abs(values).argmax()
        assert values[index] != 0
        values[index] *= 1.001
        data[...] = values
    assert shell("check", "run.h5") == 1
    assert any(line.startswith("FAILED") and "recomputed" in line for line in shell.out.splitlines()), shell.out
