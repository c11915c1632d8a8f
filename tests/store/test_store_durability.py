"""Kills, full disks, second writers: what was committed stays, and everything else is one clear error."""

from __future__ import annotations

import errno
import os
import resource
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from frg.errors import StoreError
from frg.store import files
from frg.store.compare import differences
from frg.store.hdf5 import open_for_resume, read_run
from frg.store.memory import MemoryStore
from frg.store.naming import list_runs

# Resumes the run if it is there, commits numbered steps without end, and reports each commit when done.
WRITER = """
import sys
from pathlib import Path
import numpy as np
from frg.errors import Outcome
from frg.records import Inputs, Step
from frg.store.hdf5 import HDF5Store, open_for_resume
from frg.store.signature import signed

path = Path(sys.argv[1])
inputs = signed(Inputs(title="t", truncation_text="", parameters={}, equations="", latex="", regulator="flat",
                       regulator_parameters={}, settings={}, signature=""))
if path.exists():
    store = open_for_resume(path, inputs=inputs, frg_version="1")
else:
    store = HDF5Store.create(path, inputs, command="c", created_utc="u", frg_version="1", packages={})
while True:
    n = store.count
    search = {"starts": n * n}
    store.append_step(Step(order={"n": n}, outcome=Outcome.NONE_FOUND, search=search, seconds=n / 7))
    print(n, flush=True)
"""


def child(path: Path) -> subprocess.Popen[str]:
    code = "import sys; sys.path[:0] = sys.argv[2:];" + WRITER
    command = [sys.executable, "-c", code, str(path), *sys.path]
    return subprocess.Popen(command, stdout=subprocess.PIPE, text=True)


def test_every_committed_step_survives_twenty_kills(tmp_path: Path) -> None:
    path = tmp_path / "run.h5"
    random = np.random.default_rng(20)
    acknowledged = -1
    for _ in range(20):
        with child(path) as process:
            assert process.stdout is not None
            acknowledged = int(process.stdout.readline())
            time.sleep(random.uniform(0.0, 0.05))
            process.send_signal(signal.SIGKILL)
            numbers = [int(line) for line in process.stdout.read().split("\n")[:-1]]
        acknowledged = max([acknowledged, *numbers])
        run = read_run(path)
        assert len(run.steps) > acknowledged
        assert [step.order["n"] for step in run.steps] == list(range(len(run.steps)))
        assert run.status == "interrupted"
        assert [s.status for s in list_runs(tmp_path)] == ["interrupted"]
    assert acknowledged >= 20
    with MemoryStore(replace(run, steps=(), status="running")) as whole:
        for n, step in enumerate(run.steps):
            whole.append_step(replace(step, order={"n": n}, search={"starts": n * n}, seconds=n / 7))
        assert differences(whole.read().steps, run.steps) == ()


def test_a_live_writer_is_seen_and_a_second_one_refused(tmp_path: Path, samples) -> None:
    path = tmp_path / "run.h5"
    with child(path) as process:
        assert process.stdout is not None
        process.stdout.readline()
        try:
            assert [s.status for s in list_runs(tmp_path)] == ["running"]
            assert read_run(path).status == "running"
            with pytest.raises(StoreError, match="another writer has this run open"):
                open_for_resume(path)
            with pytest.raises(StoreError, match="another writer has this run open"):
                samples.create(path)
        finally:
            process.kill()
            process.stdout.read()
    with open_for_resume(path) as store:
        assert store.count == len(read_run(path).steps)


def test_listing_and_reading_change_nothing_on_disk(steps_only: Path) -> None:
    def state() -> list[tuple[str, int, bytes]]:
        return [(p.name, p.stat().st_mtime_ns, p.read_bytes()) for p in sorted(steps_only.parent.iterdir())]

    before = state()
    assert [s.status for s in list_runs(steps_only.parent)] == ["interrupted"]
    read_run(steps_only)
    assert state() == before
    assert [name for name, *_ in before] == ["stopped.h5"]


def test_a_stale_lock_file_does_not_block(steps_only: Path) -> None:
    files.lock_path(steps_only).write_bytes(b"")
    with open_for_resume(steps_only) as store:
        assert store.count == 3
    assert not files.lock_path(steps_only).exists()


def test_a_lock_on_a_removed_lock_file_does_not_count(tmp_path: Path) -> None:
    first = files.WriterLock(tmp_path / "run.h5")
    files.lock_path(tmp_path / "run.h5").unlink()
    second = files.WriterLock(tmp_path / "run.h5")
    assert files.has_writer(tmp_path / "run.h5")
    second.release()
    second.release()
    first.release()
    assert not files.has_writer(tmp_path / "run.h5")


@contextmanager
def failing(monkeypatch: pytest.MonkeyPatch, name: str, code: int) -> Iterator[None]:
    """`os.write` writes half and then fails, or `os.fsync` or `os.replace` fails, with this error number."""
    real_write = os.write
    calls = []

    def write(descriptor: int, data: memoryview) -> int:
        calls.append(descriptor)
        if len(calls) == 1:
            return real_write(descriptor, data[: len(data) // 2])
        raise OSError(code, os.strerror(code))

    def fail(*_: object) -> None:
        raise OSError(code, os.strerror(code))

    with monkeypatch.context() as patch:
        patch.setattr(files.os, name, write if name == "write" else fail)
        yield


@pytest.mark.parametrize(
    ("name", "code", "words"),
    [
        ("write", errno.ENOSPC, "No space left on device"),
        ("write", errno.EDQUOT, "quota"),
        ("fsync", errno.ENOSPC, "No space left on device"),
        ("fsync", errno.EIO, "Input/output error"),
        ("replace", errno.EACCES, "Permission denied"),
    ],
)
def test_a_failed_commit_keeps_the_state_before_and_can_be_repeated(
    tmp_path: Path, samples, monkeypatch: pytest.MonkeyPatch, name: str, code: int, words: str
) -> None:
    path = tmp_path / "run.h5"
    with samples.create(path) as store:
        store.append_step(samples.step(2))
        before = path.read_bytes()
        with failing(monkeypatch, name, code), pytest.raises(StoreError, match=words) as caught:
            store.append_step(samples.step(3))
        assert caught.value.place.source == str(path)
        assert caught.value.remedy
        assert path.read_bytes() == before
        assert sorted(p.name for p in tmp_path.iterdir()) == ["run.h5", "run.h5.lock"]
        assert store.count == 1
        store.append_step(samples.step(3))
        store.append_step(samples.step(4))
    run = read_run(path)
    assert [step.order["n"] for step in run.steps] == [2, 3, 4]
    with MemoryStore.create(samples.inputs(), **samples.provenance) as twin:
        for n in (2, 3, 4):
            twin.append_step(samples.step(n))
    assert differences(twin.read(), run) == ()


def test_a_write_refused_by_the_system_keeps_the_state_before(tmp_path: Path, samples) -> None:
    """A true failure of the system call in mid-file: the limit on the size of files."""
    path = tmp_path / "run.h5"
    with samples.create(path) as store:
        before = path.read_bytes()
        soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
        resource.setrlimit(resource.RLIMIT_FSIZE, (len(before) + 100, hard))
        try:
            with pytest.raises(StoreError, match="File too large"):
                store.append_step(samples.step(4))
        finally:
            resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))
        assert path.read_bytes() == before
        store.append_step(samples.step(4))
    assert len(read_run(path).steps) == 1


@pytest.mark.parametrize("moment", ["fsync", "replace"])
def test_an_interrupt_in_mid_commit_loses_nothing(
    tmp_path: Path, samples, monkeypatch: pytest.MonkeyPatch, moment: str
) -> None:
    path = tmp_path / "run.h5"
    real = getattr(os, moment)

    def interrupted(*arguments: object) -> None:
        real(*arguments)
        raise KeyboardInterrupt

    with samples.create(path) as store:
        store.append_step(samples.step(2))
        with monkeypatch.context() as patch:
            patch.setattr(files.os, moment, interrupted)
            with pytest.raises(KeyboardInterrupt):
                store.append_step(samples.step(3))
        assert len(read_run(path).steps) == (1 if moment == "fsync" else 2)
        store.set_results(tracks=(), verdict=None, status="interrupted")
    run = read_run(path)
    assert [step.order["n"] for step in run.steps] == [2, 3]
    assert run.status == "interrupted"
    assert [p.name for p in tmp_path.iterdir()] == ["run.h5"]


def test_a_failed_creation_leaves_nothing(tmp_path: Path, samples, monkeypatch: pytest.MonkeyPatch) -> None:
    with failing(monkeypatch, "write", errno.ENOSPC), pytest.raises(StoreError, match="No space left"):
        samples.create(tmp_path / "run.h5")
    assert list(tmp_path.iterdir()) == []


def test_unusable_places_are_refused(tmp_path: Path, samples, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "file").write_text("x")
    (tmp_path / "folder.h5").mkdir()
    (tmp_path / "dangling.h5").symlink_to(tmp_path / "nowhere")
    for name, words in [
        ("file/run.h5", "(?s)making the folder failed.*remedy"),
        ("folder.h5", "a folder of this name exists already"),
        ("file", "a file of this name exists already"),
        ("dangling.h5", "a file of this name exists already"),
        ("x" * 300 + ".h5", "File name too long"),
        ("nul\0.h5", "not a usable path"),
    ]:
        with pytest.raises(StoreError, match=words):
            samples.create(tmp_path / name)

    def denied(*_: object, **__: object) -> None:
        raise PermissionError(errno.EACCES, "Permission denied")

    with monkeypatch.context() as patch:
        patch.setattr(files.os, "open", denied)
        with pytest.raises(StoreError, match="(?s)Permission denied.*a folder you may write to"):
            samples.create(tmp_path / "run.h5")
    assert sorted(p.name for p in tmp_path.iterdir()) == ["dangling.h5", "file", "folder.h5"]


def test_missing_folders_are_made_and_a_link_is_followed_on_resume(tmp_path: Path, samples) -> None:
    path = tmp_path / "a" / "b" / "run.h5"
    with samples.create(path) as store:
        assert store.location == str(path)
    (tmp_path / "link.h5").symlink_to(path)
    with open_for_resume(tmp_path / "link.h5") as store:
        store.append_step(samples.step(2))
    assert (tmp_path / "link.h5").is_symlink()
    assert len(read_run(path).steps) == 1


def test_resume_goes_on_after_the_last_step(steps_only: Path, run_file: Path, samples) -> None:
    from frg.store.checking import check_run

    with open_for_resume(steps_only, inputs=samples.inputs(), frg_version="0.1.0") as store:
        assert store.count == 3
        track, verdict = samples.results(store.read().steps)
        store.set_results(tracks=(track,), verdict=verdict, status="complete")
    assert differences(read_run(steps_only), read_run(run_file)) == ()
    assert check_run(steps_only).ok


def test_resume_names_what_differs(steps_only: Path, samples) -> None:
    before = steps_only.read_bytes()
    settings = {**samples.inputs().settings, "starts": 200, "box": "wide"}
    other = samples.inputs(
        parameters={"d": "2.7"},
        regulator="gaussian",
        regulator_parameters={"alpha": 2.0},
        settings=settings,
        truncation_text=samples.inputs().truncation_text.replace("about = 0", 'about = "minimum"'),
    )
    with pytest.raises(StoreError) as caught:
        open_for_resume(steps_only, inputs=other)
    for words in (
        "parameter d: stored '3', asked '2.7'",
        "regulator: stored exponential, asked gaussian",
        "regulator parameter alpha: stored 1.0, asked 2.0",
        "setting starts: stored 100, asked 200",
        "setting box: stored (absent), asked 'wide'",
        "truncation file: first difference in line 7",
    ):
        assert words in str(caught.value)
    with pytest.raises(StoreError, match=r"begun by version 0\.1\.0, this is 9"):
        open_for_resume(steps_only, frg_version="9")
    comment = samples.inputs(truncation_text=samples.inputs().truncation_text + "# a remark\n")
    open_for_resume(steps_only, inputs=comment).close()
    assert steps_only.read_bytes() == before
    assert [p.name for p in steps_only.parent.iterdir()] == ["stopped.h5"]


def test_resume_refuses_what_it_must_not_touch(steps_only: Path, tmp_path: Path) -> None:
    import h5py

    steps_only.chmod(0o444)
    with pytest.raises(StoreError, match="read-only"):
        open_for_resume(steps_only)
    steps_only.chmod(0o644)
    with pytest.raises(StoreError, match="the path is a folder"):
        open_for_resume(tmp_path)
    with pytest.raises(StoreError, match="No such file"):
        open_for_resume(tmp_path / "none.h5")
    with h5py.File(steps_only, "r+") as file:
        file.attrs["remark"] = "added"
    with pytest.raises(StoreError, match="changed by another program"):
        open_for_resume(steps_only)
    assert len(read_run(steps_only).steps) == 3
    assert not files.lock_path(steps_only).exists()


def test_resume_refuses_a_signature_that_is_not_of_its_inputs(steps_only: Path, changed) -> None:
    path = changed(lambda run: replace(run, inputs=replace(run.inputs, signature="0" * 64)))
    with pytest.raises(StoreError, match="signature does not belong"):
        open_for_resume(path)
    open_for_resume(steps_only).close()
