"""The run kept in runs/ as a sample opens, checks, and repeats."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from frg.store.hdf5 import read_run

SAMPLE = Path(__file__).resolve().parents[2] / "runs" / "sample-ising-lpa.h5"


def test_the_sample_is_sound(shell) -> None:  # type: ignore[no-untyped-def]
    assert shell("check", SAMPLE) == 0, shell.out


def test_the_sample_repeats_from_its_own_text(shell, tmp_path: Path) -> None:  # type: ignore[no-untyped-def]
    stored = read_run(SAMPLE)
    (tmp_path / "again.toml").write_text(stored.inputs.truncation_text)
    orders = stored.inputs.settings["orders"]
    assert isinstance(orders, list)
    code = shell("converge", "again.toml", "--orders", f"{orders[0]}..{orders[-1]}", "--quiet", "--save", "again.h5")
    assert code == 0
    again = read_run(tmp_path / "again.h5")
    assert again.inputs.signature == stored.inputs.signature
    assert again.verdict is not None and stored.verdict is not None
    assert again.verdict.counts == stored.verdict.counts
    main = [(r, r.tracks[0]) for r in (stored, again)]
    for s in range(len(stored.steps)):
        points = [r.steps[s].fixed_points[int(t.points[list(t.steps).index(s)])] for r, t in main]
        # the same computation on another machine: equal to round-off, not bit for bit
        assert points[1].couplings == pytest.approx(points[0].couplings, rel=1e-9)
        assert np.allclose(points[1].theta, points[0].theta, rtol=1e-9, atol=1e-9)
