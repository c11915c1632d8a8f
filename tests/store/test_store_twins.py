"""Memory and HDF5 stores hold the same, to the last bit, and what is read back is what was given."""

from __future__ import annotations

import itertools
import math
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from frg.errors import Outcome, StoreError
from frg.records import Extrapolation, FixedPoint, Growth, Inputs, Profile, Step, Track, Verdict
from frg.store.compare import differences
from frg.store.hdf5 import HDF5Store, read_run
from frg.store.memory import MemoryStore

TEXT = st.text(st.characters(exclude_characters="\0", exclude_categories=("Cs",)), max_size=12)
INT = st.integers(-(2**62), 2**62)
REAL = st.floats(width=64)
JSON_REAL = REAL.map(lambda x: math.nan if math.isnan(x) else x)  # JSON knows one NaN only
COUNTER = itertools.count()


def reals(*shape: int) -> st.SearchStrategy[np.ndarray]:
    return hnp.arrays(np.float64, shape, elements=REAL)


def complexes(*shape: int) -> st.SearchStrategy[np.ndarray]:
    return hnp.arrays(np.complex128, shape, elements=st.complex_numbers(allow_nan=True, allow_infinity=True))


NOTES = st.lists(TEXT, max_size=2).map(tuple)


@st.composite
def profiles(draw: st.DrawFn) -> Profile:
    m, k = draw(st.integers(0, 4)), draw(st.integers(0, 3))
    functions = draw(st.sampled_from((reals, complexes)))
    return Profile(
        x_label=draw(TEXT),
        x=draw(reals(m)),
        potential=draw(reals(m)),
        slope=draw(reals(m)),
        eigenfunctions=draw(functions(k, m)),
    )


@st.composite
def fixed_points(draw: st.DrawFn) -> FixedPoint:
    n = draw(st.integers(0, 4))
    return FixedPoint(
        label=draw(TEXT),
        kind=draw(st.sampled_from(("gaussian", "physical", "spurious"))),
        names=tuple(draw(st.lists(TEXT, min_size=n, max_size=n))),
        couplings=draw(reals(n)),
        eta=draw(st.dictionaries(TEXT, REAL, max_size=2)),
        theta=draw(complexes(n)),
        right=draw(complexes(n, n)),
        left=draw(complexes(n, n)),
        theta_odd=draw(complexes(draw(st.integers(0, 2)))),
        residual=draw(REAL),
        condition=draw(REAL),
        relevant=draw(INT),
        marginal=draw(INT),
        certified=draw(st.sampled_from((None, True, False))),
        notes=draw(NOTES),
        profile=draw(st.none() | profiles()),
    )


STEPS = st.builds(
    Step,
    order=st.dictionaries(TEXT, INT, max_size=2),
    outcome=st.sampled_from(Outcome),
    fixed_points=st.lists(fixed_points(), max_size=2).map(tuple),
    search=st.dictionaries(TEXT, INT, max_size=3),
    seconds=REAL,
    notes=NOTES,
)


@st.composite
def tracks(draw: st.DrawFn) -> Track:
    k, m = draw(st.integers(0, 3)), draw(st.integers(0, 3))
    return Track(
        label=draw(TEXT),
        rule=draw(TEXT),
        steps=draw(hnp.arrays(np.int64, k)),
        points=draw(hnp.arrays(np.int64, k)),
        theta=draw(complexes(k, m)),
        distance=draw(reals(k)),
        next_distance=draw(reals(k)),
        notes=draw(NOTES),
    )


@st.composite
def growths(draw: st.DrawFn) -> Growth:
    k = draw(st.integers(0, 3))
    numbers = {name: draw(REAL) for name in ("slope", "offset", "scatter")}
    return Growth(canonical=draw(reals(k)), entering=draw(reals(k)), **numbers)


COMPLEX = st.complex_numbers(allow_nan=True, allow_infinity=True)
VERDICTS = st.builds(
    Verdict,
    counts=st.lists(INT, max_size=3).map(tuple),
    settled_from=st.none() | INT,
    relevant=st.none() | INT,
    finite=st.sampled_from(("supported", "not supported", "undecided")),
    reasons=NOTES,
    exponents=st.lists(st.builds(Extrapolation, value=COMPLEX, error=REAL, last=COMPLEX), max_size=2).map(
        tuple
    ),
    growth=st.none() | growths(),
)
SETTING = st.recursive(
    st.none() | st.booleans() | INT | JSON_REAL | TEXT,
    lambda inner: st.lists(inner, max_size=2) | st.dictionaries(TEXT, inner, max_size=2),
    max_leaves=4,
)
INPUTS = st.builds(
    Inputs,
    title=TEXT,
    truncation_text=TEXT,
    parameters=st.dictionaries(TEXT, TEXT, max_size=2),
    equations=TEXT,
    latex=TEXT,
    regulator=TEXT,
    regulator_parameters=st.dictionaries(TEXT, JSON_REAL, max_size=2),
    settings=st.dictionaries(TEXT, SETTING, max_size=2),
    signature=TEXT,
)


@settings(max_examples=60, deadline=None, suppress_health_check=list(HealthCheck))
@given(
    inputs=INPUTS,
    steps=st.lists(STEPS, max_size=2),
    followed=st.lists(tracks(), max_size=2),
    verdict=st.none() | VERDICTS,
    status=st.sampled_from(("running", "complete", "interrupted", "failed")),
)
def test_twins_agree_at_every_commit(
    tmp_path: Path,
    inputs: Inputs,
    steps: list[Step],
    followed: list[Track],
    verdict: Verdict | None,
    status: str,
) -> None:
    path = tmp_path / f"{next(COUNTER)}.h5"
    about = {"command": "c", "created_utc": "t", "frg_version": "v", "packages": {"p": "1"}}
    with MemoryStore.create(inputs, **about) as memory, HDF5Store.create(path, inputs, **about) as hdf5:
        for step in steps:
            for store in (memory, hdf5):
                store.append_step(step)
            assert memory.count == hdf5.count
        assert differences(memory.read(), hdf5.read()) == ()
        for store in (memory, hdf5):
            store.set_results(tracks=followed, verdict=verdict, status=status)
        assert differences(memory.read(), hdf5.read()) == ()
        given_back = hdf5.read()
    assert differences(memory.read(), read_run(path)) == ()
    assert differences(given_back.inputs, inputs) == ()
    assert differences(given_back.steps, tuple(steps)) == ()
    assert differences(given_back.tracks, tuple(followed)) == ()
    assert differences(given_back.verdict, verdict) == ()


def test_special_floats_keep_their_bits(tmp_path: Path, samples) -> None:
    payload = np.array([0x7FF8000000000123], dtype=np.uint64).view(np.float64)[0]
    values = np.array([0.1, -0.0, 5e-324, np.inf, -np.inf, payload, 1 / 3, np.nextafter(1, 2)])
    n = len(values)
    point = samples.point("A", "physical", np.zeros(n))
    from dataclasses import replace

    step = Step(order={"n": 1}, outcome=Outcome.FOUND, fixed_points=(replace(point, couplings=values),))
    with samples.create(tmp_path / "bits.h5") as store:
        store.append_step(step)
        back = store.read().steps[0].fixed_points[0].couplings
    assert back.tobytes() == values.tobytes()


def test_stored_arrays_are_not_the_callers(samples) -> None:
    step = samples.step(2)
    with MemoryStore.create(samples.inputs(), **samples.provenance) as store:
        store.append_step(step)
        step.fixed_points[0].couplings[0] = 99.0
        kept = store.read().steps[0].fixed_points[0].couplings
    assert kept[0] != 99.0
    with pytest.raises(ValueError, match="read-only"):
        kept[0] = 1.0


@pytest.mark.parametrize("kind", ["memory", "hdf5"])
def test_appending_drops_the_results_of_fewer_steps(tmp_path: Path, samples, kind: str) -> None:
    store = (
        MemoryStore.create(samples.inputs(), **samples.provenance)
        if kind == "memory"
        else samples.create(tmp_path / "run.h5")
    )
    with store:
        samples.fill(store)
        assert store.read().verdict is not None
        store.append_step(samples.step(4))
        run = store.read()
    assert (run.status, run.tracks, run.verdict, len(run.steps)) == ("running", (), None, 4)
    assert store.read().status == "interrupted"
    with pytest.raises(StoreError, match="closed"):
        store.append_step(samples.step(4))


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"title": "nul \0"}, "NUL"),
        ({"equations": "\ud800"}, "surrogate"),
        ({"settings": {"a": object()}}, "no plain form"),
        ({"settings": {"a": 1j}}, "no plain form"),
    ],
)
def test_what_no_file_can_hold_is_refused_by_both(tmp_path: Path, samples, changes, message: str) -> None:
    from dataclasses import replace

    inputs = replace(samples.inputs(), **changes)
    with pytest.raises(StoreError, match=message):
        MemoryStore.create(inputs, **samples.provenance)
    with pytest.raises(StoreError, match=message):
        HDF5Store.create(tmp_path / "run.h5", inputs, **samples.provenance)
    assert list(tmp_path.iterdir()) == []


def test_shapes_that_disagree_are_refused_and_nothing_is_committed(tmp_path: Path, samples) -> None:
    from dataclasses import replace

    step = samples.step(3)
    bad = replace(step.fixed_points[0], couplings=np.zeros(2))
    with samples.create(tmp_path / "run.h5") as store:
        with pytest.raises(StoreError, match=r"couplings of fixed point 'A' has shape \(2,\)"):
            store.append_step(replace(step, fixed_points=(bad,)))
        assert store.read().steps == ()
        store.append_step(step)
        assert len(store.read().steps) == 1


def test_two_runs_can_be_open_at_once(tmp_path: Path, samples) -> None:
    with samples.create(tmp_path / "one.h5") as one, samples.create(tmp_path / "two.h5") as two:
        for n in samples.orders:
            one.append_step(samples.step(n))
            two.append_step(samples.step(n))
        assert differences(one.read(), two.read()) == ()


def test_both_stores_hold_the_same_nan_in_settings(tmp_path: Path, samples) -> None:
    odd = float(np.array([0xFFF8000000000123], dtype=np.uint64).view(np.float64)[0])
    inputs = samples.inputs(settings={"x": odd, "y": [odd]}, regulator_parameters={"alpha": odd})
    with (
        MemoryStore.create(inputs, **samples.provenance) as memory,
        HDF5Store.create(tmp_path / "run.h5", inputs, **samples.provenance) as hdf5,
    ):
        assert differences(memory.read(), hdf5.read()) == ()
