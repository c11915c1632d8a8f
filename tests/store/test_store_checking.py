"""A doctored run contradicts itself; each kind of tampering is named by the check that sees it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest

from frg.errors import Outcome, StoreError
from frg.records import FixedPoint, Run, Track, Verdict
from frg.store import files
from frg.store.checking import check_run

Alter = Callable[[Run], Run]


def failed(path: Path) -> dict[str, str]:
    return {check.name: check.detail for check in check_run(path).failed}


def test_a_sound_run_passes_every_check(run_file: Path) -> None:
    report = check_run(run_file)
    assert report.ok
    assert report.run is not None and len(report.run.steps) == 3
    assert {check.passed for check in report.checks} == {True}
    assert len({check.name for check in report.checks}) == len(report.checks) == 12


def test_a_stopped_run_passes(steps_only: Path) -> None:
    report = check_run(steps_only)
    assert report.ok
    assert report.run is not None and report.run.status == "interrupted"


def test_missing_tolerances_are_said_not_failed(tmp_path: Path, samples) -> None:
    with samples.create(tmp_path / "run.h5", settings={}) as store:
        samples.fill(store)
    report = check_run(tmp_path / "run.h5")
    assert report.ok
    assert [c.name for c in report.checks if c.passed is None] == ["relevant counts", "residuals"]


def point(**changes: object) -> Alter:
    """Change the physical fixed point of the last step."""

    def alter(run: Run) -> Run:
        step = run.steps[-1]
        new: FixedPoint = replace(step.fixed_points[1], **changes)  # type: ignore[arg-type]
        return replace(run, steps=(*run.steps[:-1], replace(step, fixed_points=(step.fixed_points[0], new))))

    return alter


def track(**changes: object) -> Alter:
    return lambda run: replace(run, tracks=(replace(run.tracks[0], **changes),))  # type: ignore[arg-type]


def verdict(**changes: object) -> Alter:
    def alter(run: Run) -> Run:
        assert isinstance(run.verdict, Verdict)
        return replace(run, verdict=replace(run.verdict, **changes))  # type: ignore[arg-type]

    return alter


def setting(name: str, value: object) -> Alter:
    return lambda run: replace(run, inputs=replace(run.inputs, settings={**run.inputs.settings, name: value}))


def outcome(word: Outcome) -> Alter:
    return lambda run: replace(run, steps=(*run.steps[:-1], replace(run.steps[-1], outcome=word)))


def altered_growth(run: Run) -> Run:
    assert run.verdict is not None and run.verdict.growth is not None
    return verdict(growth=replace(run.verdict.growth, slope=0.5))(run)


def altered_last(run: Run) -> Run:
    assert run.verdict is not None
    first, second = run.verdict.exponents
    return verdict(exponents=(replace(first, last=1.6 + 0j), second))(run)


def altered_track_theta(run: Run) -> Run:
    theta = run.tracks[0].theta.copy()
    theta[1, 0] += 1e-6
    return track(theta=theta)(run)


def altered_eigenvector(run: Run) -> Run:
    left = run.steps[-1].fixed_points[1].left.copy()
    left[0, 0] *= 1.001
    return point(left=left)(run)


THETA = np.array([1.75, -0.7, -3.0, -5.5], dtype=complex)
TAMPERED: list[tuple[Alter, str, str]] = [
    (point(theta=THETA[[1, 0, 2, 3]]), "theta sorted", "step 2, B: theta is not sorted"),
    (point(theta=THETA * np.array([1, 1, 1, np.nan])), "theta sorted", "not finite"),
    (point(theta=THETA + 1), "relevant counts", "1 relevant directions stored, theta gives 2"),
    (point(theta=THETA + 1), "tracks", "not those of the fixed point"),
    (point(relevant=2), "relevant counts", "2 relevant directions stored, theta gives 1"),
    (point(relevant=2), "verdict", "those of no track"),
    (point(marginal=1), "relevant counts", "1 marginal directions stored, theta gives 0"),
    (altered_eigenvector, "eigenvectors", "not bi-orthonormal"),
    (point(right=np.full((4, 4), np.inf)), "eigenvectors", "not finite"),
    (point(residual=1e-3), "residuals", "residual 0.001 is not within the tolerance 1e-10"),
    (point(residual=float("nan")), "residuals", "residual nan"),
    (point(couplings=np.array([0.0, np.inf, 0, 0])), "residuals", "couplings are not finite"),
    (point(label="A"), "outcomes", "share a label"),
    (outcome(Outcome.NONE_FOUND), "outcomes", '"none found" with 2 fixed points'),
    (
        lambda r: replace(r, steps=(*r.steps[:2], replace(r.steps[2], fixed_points=()))),
        "outcomes",
        "without a",
    ),
    (altered_track_theta, "tracks", "at step 1 are not those"),
    (track(points=np.array([1, 1, 2])), "tracks", "fixed point 2 of step 2, which does not exist"),
    (track(points=np.array([1, -1, 1])), "tracks", "fixed point -1 of step 1"),
    (track(steps=np.array([0, 1, 7])), "tracks", "step 7, which does not exist"),
    (track(steps=np.array([0, 2, 1])), "tracks", "do not rise"),
    (track(points=np.array([1, 0, 1])), "tracks", "not those of the fixed point"),
    (track(distance=np.array([0.1, -0.1, 0.1])), "tracks", "negative"),
    (verdict(counts=(1, 1, 2)), "verdict", "those of no track"),
    (verdict(counts=(1, 1)), "verdict", "2 counts for 3 steps"),
    (lambda r: replace(r, tracks=()), "verdict", "counts without a track"),
    (verdict(relevant=2), "verdict", "settled at 2 from order 2"),
    (verdict(relevant=None), "verdict", "needs both"),
    (verdict(settled_from=9), "verdict", "does not reach"),
    (verdict(settled_from=None, relevant=None), "verdict", "never settles"),
    (altered_growth, "verdict", "slope 0.5 stored, the entering exponents give 2"),
    (altered_last, "verdict", "none of the tracked ones"),
    (setting("residual_tolerance", 1.0), "signature", "the stored inputs give"),
    (lambda r: replace(r, inputs=replace(r.inputs, parameters={"d": "4"})), "signature", "the stored inputs"),
    (lambda r: replace(r, inputs=replace(r.inputs, regulator="flat")), "signature", "the stored inputs"),
    (setting("orders", [2, 3, 4, 5]), "status", "complete with 3 of 4 orders"),
    (setting("orders", [2, 4, 6]), "status", "asked for were"),
    (lambda r: replace(r, steps=(), tracks=(), verdict=None), "status", "complete without a step"),
]


@pytest.mark.parametrize(("alter", "name", "words"), TAMPERED)
def test_a_doctored_run_is_found_out(
    changed: Callable[[Alter], Path], alter: Alter, name: str, words: str
) -> None:
    found = failed(changed(alter))
    assert name in found
    assert words in found[name]


def test_the_rewritten_run_itself_passes(changed: Callable[[Alter], Path]) -> None:
    assert failed(changed(lambda run: run)) == {}


def test_steps_without_their_marker_are_found_and_not_read(run_file: Path) -> None:
    with h5py.File(run_file, "r+") as file:
        del file["steps/0001"].attrs["committed"]
    run_file.write_bytes(files.seal(run_file.read_bytes()))
    report = check_run(run_file)
    assert report.run is not None and len(report.run.steps) == 1
    detail = failed(run_file)["committed steps"]
    assert "step 0001 is out of sequence or not committed" in detail
    assert "step_count is 3, but 1 steps are committed" in detail


def test_a_missing_step_is_found(run_file: Path) -> None:
    with h5py.File(run_file, "r+") as file:
        file["steps"].move("0001", "0007")
    run_file.write_bytes(files.seal(run_file.read_bytes()))
    assert "step 0002 is out of sequence" in failed(run_file)["committed steps"]


def test_one_changed_number_breaks_the_seal(run_file: Path) -> None:
    with h5py.File(run_file, "r+") as file:
        file["steps/0002/fixed_points/1/couplings"][1] = 0.5
    assert failed(run_file) == {"checksum": "missing: another program wrote the file"}


def test_a_track_may_start_late_and_grow_directions(changed: Callable[[Alter], Path]) -> None:
    """What studies do: a fixed point found from the second step on, a direction that enters at the third."""

    def alter(run: Run) -> Run:
        theta = run.tracks[0].theta[1:].copy()
        theta[0, 1] = np.nan
        late = Track(
            label="B",
            rule="r",
            steps=np.array([1, 2]),
            points=np.array([1, 1]),
            theta=theta,
            distance=np.zeros(2),
            next_distance=np.full(2, np.inf),
        )
        return verdict(counts=(-1, 1, 1), settled_from=3)(replace(run, tracks=(late,)))

    assert failed(changed(alter)) == {}


def test_what_is_no_file_is_an_error_not_a_report(tmp_path: Path) -> None:
    for path in (tmp_path, tmp_path / "none.h5"):
        with pytest.raises(StoreError):
            check_run(path)
