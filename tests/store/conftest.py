"""A small run that is consistent with itself, made of numbers without physical meaning."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from frg.errors import Outcome
from frg.records import Extrapolation, FixedPoint, Growth, Inputs, Profile, Run, Step, Track, Verdict
from frg.store.base import AbstractStore
from frg.store.hdf5 import HDF5Store
from frg.store.signature import signed

TRUNCATION = """title = "sample"
[space]
dimension = "d"
[parameters]
d = 3
[running]
U = { kind = "function", of = "rho", about = 0, order = "n" }   # a comment
"""
ORDERS = (2, 3, 4)
PROVENANCE = {
    "command": "frg converge sample.toml",
    "created_utc": "2026-12-01T06:47:09Z",
    "frg_version": "0.1.0",
    "packages": {"numpy": "2.4"},
}


def make_inputs(**changes: object) -> Inputs:
    parts: dict[str, object] = {
        "title": "sample",
        "truncation_text": TRUNCATION,
        "parameters": {"d": "3"},
        "equations": "d_t U = ...",
        "latex": r"\partial_t U",
        "regulator": "exponential",
        "regulator_parameters": {"alpha": 1.0},
        "settings": {
            "orders": list(ORDERS),
            "residual_tolerance": 1e-10,
            "marginal_tolerance": 1e-6,
            "starts": 100,
        },
        "signature": "",
    }
    return signed(Inputs(**{**parts, **changes}))  # type: ignore[arg-type]


def make_point(label: str, kind: str, theta: np.ndarray) -> FixedPoint:
    n = len(theta)
    right = np.eye(n) + np.triu(np.full((n, n), 0.25), 1)
    x = np.linspace(0.0, 1.0, 4)
    return FixedPoint(
        label=label,
        kind=kind,
        names=tuple(f"U{i + 1}" for i in range(n)),
        couplings=np.arange(n) / 3,
        eta={"phi": 0.03},
        theta=theta.astype(complex),
        right=right,
        left=np.linalg.inv(right).conj().T,
        theta_odd=np.array([2.5 + 0j]),
        residual=1e-14,
        condition=12.5,
        relevant=int(np.sum(theta > 1e-6)),
        marginal=int(np.sum(np.abs(theta) <= 1e-6)),
        certified=True,
        notes=("note",),
        profile=Profile(x_label="rho", x=x, potential=x**2, slope=2 * x, eigenfunctions=np.ones((n, 4))),
    )


def make_step(order: int) -> Step:
    physical = np.array([1.5 + 1 / order, -0.7, -3.0, -5.5])[:order]
    gaussian = np.array([2.0, 1.0, 0.0, -1.0])[:order]
    return Step(
        order={"n": order},
        outcome=Outcome.FOUND,
        fixed_points=(make_point("A", "gaussian", gaussian), make_point("B", "physical", physical)),
        search={"starts": 100, "converged": 60},
        seconds=0.25,
        notes=("one", "two"),
    )


def make_results(steps: tuple[Step, ...]) -> tuple[Track, Verdict]:
    theta = np.full((len(steps), 2), np.nan, dtype=complex)
    for row, step in enumerate(steps):
        theta[row] = step.fixed_points[1].theta[:2]
    track = Track(
        label="B",
        rule="nearest couplings",
        steps=np.arange(len(steps)),
        points=np.ones(len(steps), dtype=int),
        theta=theta,
        distance=np.full(len(steps), 0.1),
        next_distance=np.full(len(steps), np.inf),
        notes=("start: the only physical one",),
    )
    growth = Growth(
        canonical=np.array([-1.0, -2.0, -3.0]),
        entering=np.array([-1.5, -3.5, -5.5]),
        slope=2.0,
        offset=0.5,
        scatter=0.0,
    )
    verdict = Verdict(
        counts=(1,) * len(steps),
        settled_from=2,
        relevant=1,
        finite="supported",
        reasons=("the count is settled",),
        exponents=(
            Extrapolation(value=1.6 + 0j, error=0.01, last=complex(theta[-1, 0])),
            Extrapolation(value=-0.7 + 0j, error=0.0, last=complex(theta[-1, 1])),
        ),
        growth=growth,
    )
    return track, verdict


def fill(store: AbstractStore) -> None:
    steps = tuple(make_step(n) for n in ORDERS)
    for step in steps:
        store.append_step(step)
    track, verdict = make_results(steps)
    store.set_results(tracks=(track,), verdict=verdict, status="complete")


class Samples:
    """The builders above, for tests that cannot import this file."""

    inputs = staticmethod(make_inputs)
    point = staticmethod(make_point)
    step = staticmethod(make_step)
    results = staticmethod(make_results)
    fill = staticmethod(fill)
    provenance = PROVENANCE
    orders = ORDERS

    @staticmethod
    def create(path: Path, **changes: object) -> HDF5Store:
        return HDF5Store.create(path, make_inputs(**changes), **PROVENANCE)  # type: ignore[arg-type]


@pytest.fixture
def samples() -> type[Samples]:
    return Samples


@pytest.fixture
def run_file(tmp_path: Path) -> Path:
    """A complete run on disk."""
    path = tmp_path / "run.h5"
    with Samples.create(path) as store:
        fill(store)
    return path


@pytest.fixture
def steps_only(tmp_path: Path) -> Path:
    """A run that stopped after its steps, without results."""
    path = tmp_path / "stopped.h5"
    with Samples.create(path) as store:
        for n in ORDERS:
            store.append_step(make_step(n))
    return path


@pytest.fixture
def changed(run_file: Path) -> Callable[..., Path]:
    """The complete run with records replaced through the writer, so that its seal is right."""
    from dataclasses import replace

    from frg.store import files, hdf5

    def change(alter: Callable[[Run], Run]) -> Path:
        run = alter(hdf5.read_run(run_file))
        image = hdf5._new_image(replace(run))
        image.flush()
        files.replace_file(run_file, files.seal(image.id.get_file_image()))
        image.close()
        return run_file

    return change
