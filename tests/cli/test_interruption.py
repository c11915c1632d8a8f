"""Runs that are interrupted, killed, or meet a full disk: what was committed is kept, and resuming changes nothing."""

from __future__ import annotations

import errno
import json
import os
import random
import signal
import time
from pathlib import Path

import pytest

from frg.store.compare import differences
from frg.store.hdf5 import read_run
from tests.cli.conftest import Shell, spawn
from tests.cli.contract import check_run_object

ORDERS = "2..9"
IGNORED = frozenset({"seconds", "command", "created_utc"})


@pytest.fixture(scope="module")
def whole(compile_cache, tmp_path_factory, shelf: Path) -> Path:
    """An uninterrupted run (which also fills the compilation cache)."""
    folder = tmp_path_factory.mktemp("whole")
    process = spawn(["converge", str(shelf / "ising_lpa.toml"), "--orders", ORDERS, "--quiet", "--save", "run.h5"],
                    compile_cache, folder)
    _, err = process.communicate(timeout=300)
    assert process.returncode == 0, err
    return folder / "run.h5"


def wait_for_steps(path: Path, count: int) -> None:
    for _ in range(600):
        if path.exists() and len(read_run(path).steps) >= count:
            return
        time.sleep(0.05)
    raise AssertionError("the run did not get going")


def resume(path: Path, shelf: Path, environment) -> None:
    process = spawn(["converge", str(shelf / "ising_lpa.toml"), "--orders", ORDERS, "--quiet", "--resume", str(path)],
                    environment, path.parent)
    _, err = process.communicate(timeout=300)
    assert process.returncode == 0, err


def test_interrupt_keeps_what_was_committed_and_resumes_to_the_same_result(
    whole: Path, compile_cache, tmp_path: Path, shelf: Path
) -> None:
    path = tmp_path / "run.h5"
    process = spawn(["converge", str(shelf / "ising_lpa.toml"), "--orders", ORDERS, "--quiet", "--save", str(path)],
                    compile_cache, tmp_path)
    wait_for_steps(path, 2)
    process.send_signal(signal.SIGINT)
    _, err = process.communicate(timeout=120)
    assert process.returncode == 130, err
    kept = read_run(path)
    assert kept.status == "interrupted" and 2 <= len(kept.steps) <= 8
    resume(path, shelf, compile_cache)
    assert differences(read_run(path), read_run(whole), ignoring=IGNORED) == ()


@pytest.mark.parametrize("committed", [0, 1, 5])
def test_kill_leaves_every_committed_step_and_resumes_to_the_same_result(
    whole: Path, compile_cache, tmp_path: Path, shelf: Path, committed: int
) -> None:
    """Killed at a random moment after so many steps; tests/benchmarks/kill_twenty.py does it at twenty."""
    path = tmp_path / "run.h5"
    process = spawn(["converge", str(shelf / "ising_lpa.toml"), "--orders", ORDERS, "--quiet", "--save", str(path)],
                    compile_cache, tmp_path)
    wait_for_steps(path, committed)
    time.sleep(random.Random(committed).uniform(0.0, 0.15))
    process.send_signal(signal.SIGKILL)
    process.communicate(timeout=60)
    reference = read_run(whole)
    kept = read_run(path)
    assert len(kept.steps) >= committed
    for mine, theirs in zip(kept.steps, reference.steps, strict=False):
        assert differences(mine, theirs, ignoring=IGNORED) == ()
    if kept.status != "complete":
        assert kept.status == "interrupted"
        resume(path, shelf, compile_cache)
    assert differences(read_run(path), reference, ignoring=IGNORED) == ()


def test_an_interrupt_leaves_one_json_object(compile_cache, tmp_path: Path, shelf: Path) -> None:
    path = tmp_path / "run.h5"
    process = spawn(["converge", str(shelf / "ising_lpa.toml"), "--orders", ORDERS, "--json", "--save", str(path)],
                    compile_cache, tmp_path)
    wait_for_steps(path, 1)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=120)
    assert process.returncode == 130 and "Traceback" not in err
    found = json.loads(out)
    check_run_object(found, "converge")
    assert found["status"] == "interrupted" and found["verdict"] is None and len(found["steps"]) >= 1


def test_a_complete_run_is_not_computed_again(whole: Path, shell: Shell, shelf: Path, tmp_path: Path) -> None:
    path = tmp_path / "again.h5"
    path.write_bytes(whole.read_bytes())
    assert shell("converge", shelf / "ising_lpa.toml", "--orders", ORDERS, "--quiet", "--resume", path) == 0
    assert differences(read_run(path), read_run(whole)) == ()


def test_a_run_that_is_being_written_is_not_resumed(compile_cache, shell: Shell, tmp_path: Path, shelf: Path) -> None:
    path = tmp_path / "run.h5"
    process = spawn(["converge", str(shelf / "ising_lpa.toml"), "--orders", ORDERS, "--quiet", "--save", str(path)],
                    compile_cache, tmp_path)
    try:
        wait_for_steps(path, 0)
        assert shell("converge", shelf / "ising_lpa.toml", "--orders", ORDERS, "--quiet", "--resume", path) == 2
        assert "remedy:" in shell.err and "Traceback" not in shell.err
    finally:
        process.kill()
        process.communicate(timeout=60)


def test_resume_refuses_other_inputs(whole: Path, shell: Shell, shelf: Path) -> None:
    assert shell("converge", shelf / "ising_lpa.toml", "--orders", "2..8", "--quiet", "--resume", whole) == 2
    assert "orders" in shell.err
    assert shell("converge", shelf / "ising_lpa.toml", "--orders", ORDERS, "--set", "d=2.9", "--quiet", "--resume", whole) == 2
    assert "parameter d" in shell.err


def test_a_full_disk_is_one_clear_error_and_corrupts_nothing(
    shell: Shell, shelf: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    real, calls = os.fsync, [0]

    def full(descriptor: int) -> None:
        calls[0] += 1
        if calls[0] > 4:
            raise OSError(errno.ENOSPC, "No space left on device")
        real(descriptor)

    monkeypatch.setattr(os, "fsync", full)
    assert shell("converge", shelf / "ising_lpa.toml", "--orders", "2..6", "--quiet", "--save", "run.h5") == 2
    assert "No space left" in shell.err and "Traceback" not in shell.err
    monkeypatch.setattr(os, "fsync", real)
    kept = read_run(tmp_path / "run.h5")
    assert len(kept.steps) >= 1
    assert [p.name for p in tmp_path.iterdir() if "tmp" in p.name.lower()] == []
