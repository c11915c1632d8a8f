"""Names of run files, lists of runs, and finding one again."""

from __future__ import annotations

import subprocess
import sys
import time
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from frg.errors import InputError
from frg.store.hdf5 import HDF5Store
from frg.store.naming import find_run, list_runs, run_path, slug

CREATED = "2026-12-01T06:47:09Z"


def test_the_name_tells_time_title_and_signature(tmp_path: Path) -> None:
    path = run_path(tmp_path, "O(N) scalar, LPA' in Zürich", "0123456789abcdef", CREATED)
    assert path == tmp_path / "20261201-064709-o-n-scalar-lpa-in-zurich-01234567.h5"
    path.touch()
    assert run_path(tmp_path, "O(N) scalar, LPA' in Zürich", "0123456789abcdef", CREATED).name == (
        "20261201-064709-o-n-scalar-lpa-in-zurich-01234567-2.h5"
    )
    with pytest.raises(InputError, match="no time in ISO form"):
        run_path(tmp_path, "t", "0" * 64, "yesterday")


@given(st.text(max_size=300))
def test_any_title_gives_a_short_plain_slug(title: str) -> None:
    made = slug(title)
    assert 1 <= len(made) <= 40
    assert set(made) <= set("abcdefghijklmnopqrstuvwxyz0123456789-")
    assert not made.startswith("-") and not made.endswith("-") and "--" not in made


def test_runs_are_listed_by_time_and_bad_files_with_their_reason(tmp_path: Path, samples) -> None:
    assert list_runs(tmp_path / "none") == []
    first = samples.create(run_path(tmp_path, "first", "a" * 64, CREATED))
    later = {**samples.provenance, "created_utc": "2026-12-02T00:00:00Z"}
    path = run_path(tmp_path, "done", "b" * 64, later["created_utc"])
    with HDF5Store.create(path, samples.inputs(), **later) as store:
        samples.fill(store)
    (tmp_path / "20261201-120000-broken-00000000.h5").write_text("not HDF5")
    (tmp_path / "README.md").write_text("text")
    (tmp_path / ".hidden.h5").write_text("text")
    listed = list_runs(tmp_path)
    assert [s.status for s in listed] == ["running", "unreadable", "complete"]
    assert [s.problem for s in listed] == [None, "this is not an HDF5 file", None]
    assert [s.step_count for s in listed] == [0, 0, 3]
    assert listed[2].title == "sample"
    assert listed[2].signature == samples.inputs().signature
    first.close()
    assert [s.status for s in list_runs(tmp_path)] == ["interrupted", "unreadable", "complete"]


def test_a_run_is_found_by_path_name_beginning_and_signature(tmp_path: Path, samples) -> None:
    paths = []
    for alpha, created in ((1.0, "2026-12-01T06:47:09Z"), (2.0, "2026-12-03T06:47:09Z")):
        inputs = samples.inputs(regulator_parameters={"alpha": alpha})
        path = run_path(tmp_path, "ising", inputs.signature, created)
        samples.create(path, regulator_parameters={"alpha": alpha}).close()
        paths.append((path, inputs.signature))
    (one, sign_one), (two, _) = paths
    assert find_run(str(one), "elsewhere") == one
    for text in (one.name, one.stem, "20261201", sign_one, sign_one[:6], sign_one[:20]):
        assert find_run(text, tmp_path) == one
    renamed = one.rename(tmp_path / "mine.h5")
    assert find_run("mine", tmp_path) == renamed
    assert find_run(sign_one[:10], tmp_path) == renamed
    with pytest.raises(InputError, match="2 runs fit: 20261203-064709-ising") as caught:
        two.with_name(two.stem + "-2.h5").write_bytes(two.read_bytes())
        find_run("20261203", tmp_path)
    assert caught.value.remedy == "give more of the name"
    with pytest.raises(InputError, match="no run of this name") as caught:
        find_run("mime", tmp_path)
    assert "mine.h5" in caught.value.remedy
    for text in ("", "a\0b", "x" * 5000, "ffff", "/no/such/run.h5"):
        with pytest.raises(InputError):
            find_run(text, tmp_path)


def test_listing_imports_little_and_is_quick(tmp_path: Path, samples) -> None:
    for number in range(20):
        with samples.create(tmp_path / f"{number}.h5") as store:
            samples.fill(store)
    code = (
        "import sys; sys.path[:] = sys.argv[2:]\n"
        "from frg.store.naming import list_runs\n"
        "assert 'h5py' not in sys.modules\n"
        "print(len(list_runs(sys.argv[1])))\n"
        "heavy = {'jax', 'sympy', 'scipy', 'matplotlib', 'flint'} & set(sys.modules)\n"
        "assert not heavy, heavy\n"
    )
    start = time.perf_counter()
    done = subprocess.run(
        [sys.executable, "-c", code, str(tmp_path), *sys.path], capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "20"
    # About 0.25 s on an idle machine; the bound only catches a list that imports too much.
    assert time.perf_counter() - start < 3.0
