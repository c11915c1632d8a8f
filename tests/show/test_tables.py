"""Text for terminals: everything said at every width, nothing cut, nothing steering the terminal."""

from __future__ import annotations

import io
import re
from dataclasses import replace

import numpy as np
import pytest
from rich.console import Console

from frg.errors import Outcome
from frg.records import FixedPoint, Run, Step
from frg.show import tables

WIDTHS = (40, 60, 80, 100, 160)


def console(width: int) -> Console:
    return Console(file=io.StringIO(), width=width, highlight=False, no_color=True, force_terminal=False)


def text_of(target: Console) -> str:
    assert isinstance(target.file, io.StringIO)
    return target.file.getvalue()


def run_text(run: Run, width: int = 100) -> str:
    target = console(width)
    tables.print_run(target, run)
    return text_of(target)


def step_text(step: Step, width: int = 80) -> str:
    target = console(width)
    tables.print_step(target, step, title="made up")
    return text_of(target)


def flat(text: str) -> str:
    return " ".join(text.split())


def with_point(run: Run, point: FixedPoint) -> Run:
    """All steps with this point in first place."""
    return replace(run, steps=tuple(replace(s, fixed_points=(point, *s.fixed_points[1:])) for s in run.steps))


def test_plain_output_has_a_fixed_width_and_no_colour(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("sys.stdout", io.StringIO())
    monkeypatch.setenv("COLUMNS", "37")
    assert (tables.console().width, tables.console().is_terminal) == (100, False)


def test_terminal_width_is_kept(monkeypatch: pytest.MonkeyPatch) -> None:
    class Terminal(io.StringIO):
        def isatty(self) -> bool:
            return True

    monkeypatch.setattr("sys.stdout", Terminal())
    monkeypatch.setenv("COLUMNS", "63")
    monkeypatch.setenv("TERM", "xterm")
    assert tables.console().width == 63


@pytest.mark.parametrize("width", WIDTHS)
def test_lines_fit_and_no_number_is_cut(study_run: Run, width: int) -> None:
    shown = run_text(study_run, width)
    assert max(map(len, shown.splitlines())) <= width
    assert "…" not in shown and "\x1b" not in shown
    for nu in ("0.62992147", "0.64955965"):
        assert nu in shown
    assert shown.count("-3.625±1.27i") == 9  # orders 4 to 12


def test_one_row_an_order_at_eighty_columns(study_run: Run) -> None:
    rows = [line for line in run_text(study_run, 80).splitlines() if re.match(r" *\d+ +3 +1 +0\.", line)]
    assert [int(row.split()[0]) for row in rows] == list(range(2, 13))


def test_the_wide_table(study_run: Run) -> None:
    lines = run_text(study_run, 100).splitlines()
    head = next(line for line in lines if "order" in line and "theta" in line)
    assert head.split("  ")[0].strip() == "order" and head.split()[-2:] == ["next", "root"]
    fourth = next(line for line in lines if line.split()[:1] == ["4"])
    assert fourth.split() == ["4", "3", "1", "0.6463374331", "1.5472,", "-0.6245,", "-3.625±1.27i", "3e-15", "8.0x"]


def test_header_tracks_and_verdict(study_run: Run) -> None:
    shown = flat(run_text(study_run))
    for words in (
        "Ising, local potential about the minimum", "regulator exponential (alpha = 2, s = 1); d = 3, N = 5/2, g = sqrt(2)",
        "status complete", "signature 0123456789ab", "track G: orders 2 to 12, 2 relevant, theta_1 2, gaussian",
        "a finite number of relevant directions is supported: 1 relevant direction, settled from order 2",
        "- no order is certified", "theta_1 = 1.53949946(7)", "theta_3 = -3.625(2)±1.270(2)i", "theta_4 = undefined",
        "omega = -theta_2 = 0.6557459(5)",
    ):
        assert words in shown
    # nu = 1/1.5394994591 = 0.649561773, error 6.1e-8 nu^2 = 2.6e-8
    assert "nu = 1/theta_1 = 0.64956177(3)" in shown


def test_unsettled_counts_are_listed(study_run: Run) -> None:
    assert study_run.verdict is not None
    open_verdict = replace(study_run.verdict, relevant=None, settled_from=None, finite="undecided", counts=(1, -1, 2))
    shown = run_text(replace(study_run, verdict=open_verdict))
    assert "is undecided\n" in shown and "relevant directions by order: 1, not found, 2" in shown


def test_a_solve_prints_its_step(study_run: Run) -> None:
    single = replace(study_run, steps=study_run.steps[2:3], tracks=(), verdict=None)
    shown = run_text(single)
    assert "order n = 4: found" in shown and "theta odd  2.5, 0.5, -1.886703838" in shown and "next root" not in shown


def test_an_interrupted_study_says_what_to_do(study_run: Run) -> None:
    shown = run_text(replace(study_run, status="interrupted", tracks=(), verdict=None))
    assert "status interrupted" in shown and "--resume" in shown


def test_a_step_tells_everything(study_run: Run) -> None:
    shown = flat(step_text(study_run.steps[-1]))
    for words in (
        "made up, order n = 12: found", "A physical, 1 relevant, certified; residual 3.2e-15, condition 4.1e+02",
        "U_min = 0.03064814414", "+7", "landmarks U_min = 0.03064814414, U'(0) = -0.1860642495", "eta phi: 0",
        "-3.625±1.27i, -8.78, -11.58, … +6 (nu = 0.6495596506)", "G gaussian, 2 relevant, 1 marginal", "S1 spurious",
        "an artefact of the truncation, see the guard on poles",
        "search: 400 starts, 131 converged, 128 duplicates, 269 failed",
        "note: 2 spurious root(s) set aside",
    ):
        assert words in shown
    assert "-0," not in shown  # the Gaussian couplings carry no sign


@pytest.mark.parametrize("width", WIDTHS)
def test_paragraphs_fit_and_go_on_under_their_text(study_run: Run, width: int) -> None:
    lines = step_text(study_run.steps[-1], width).splitlines()
    assert max(map(len, lines)) <= width
    begin = next(i for i, line in enumerate(lines) if line.startswith("   couplings"))
    end = next(i for i, line in enumerate(lines) if line.startswith("   landmarks"))
    assert all(line.startswith(" " * 14) for line in lines[begin + 1 : end])


def test_nothing_found_gives_the_advice(study_run: Run) -> None:
    empty = Step(order={"n": 2}, outcome=Outcome.NONE_FOUND, search={"starts": 9})
    assert "widen the box" in flat(step_text(empty)) and "none found" in step_text(empty)
    track = study_run.tracks[0]
    shortened = replace(track, steps=track.steps[1:], points=track.points[1:], theta=track.theta[1:],
                        distance=track.distance[1:], next_distance=track.next_distance[1:])
    rows = tables.study_rows(replace(study_run, steps=(empty, *study_run.steps[1:]), tracks=(shortened,)))
    assert rows[0] == ("2", "0", "-", "-", "none found", "-", "-") and rows[1][0] == "3"


def test_a_point_without_resolved_exponents(study_run: Run) -> None:
    none = np.zeros(0, dtype=complex)
    run = with_point(study_run, replace(study_run.steps[0].fixed_points[0], theta=none, relevant=0))
    run = replace(run, tracks=(run.tracks[0], run.tracks[0]))
    assert "no exponents" in run_text(run) and "none resolved" in step_text(run.steps[0])
    assert tables.study_rows(run)[0][3:5] == ("-", "-")


def test_nu_only_of_a_real_leading_exponent(study_run: Run) -> None:
    spiral = replace(study_run.steps[0].fixed_points[0], theta=np.array([2 + 1j, 2 - 1j]), relevant=2)
    run = with_point(study_run, spiral)
    assert tables.study_rows(run)[0][2:5] == ("2", "-", "2±1i")
    assert "nu =" not in "\n".join(tables.point_lines(spiral))


@pytest.mark.parametrize("chosen, following, roots, shown", [
    (0.1, 0.25, 3, "2.5x"), (1e-9, 0.25, 3, ">1000x"), (0.0, 0.25, 3, ">1000x"), (0.1, np.inf, 1, "none"),
    (np.nan, np.inf, 1, "none"), (np.nan, np.inf, 4, "-"), (np.nan, 0.2, 4, "-"),
])
def test_distance_of_the_next_root(study_run: Run, chosen: float, following: float, roots: int, shown: str) -> None:
    track = study_run.tracks[0]
    track = replace(track, distance=np.full(11, chosen), next_distance=np.full(11, following))
    first = study_run.steps[0]
    few = replace(first, fixed_points=(first.fixed_points * 2)[:roots])
    assert tables.study_rows(replace(study_run, steps=(few, *study_run.steps[1:]), tracks=(track,)))[0][-1] == shown


def test_foreign_text_steers_nothing(study_run: Run) -> None:
    """Markup stays text, control characters are spelled out."""
    hostile = "[red]x[/red] \x1b]0;owned\x07 \x9b31m \r over"
    point = replace(study_run.steps[0].fixed_points[0], label=hostile, notes=(hostile,))
    run = with_point(replace(study_run, inputs=replace(study_run.inputs, title=hostile)), point)
    for shown in (run_text(run), step_text(run.steps[0])):
        assert not any(c in shown for c in "\x1b\x07\x9b\r")
    assert "[red]x[/red] \\x1b]0;owned\\x07" in run_text(run)


def test_meaning_without_colour(study_run: Run) -> None:
    """With and without colours the same words."""
    coloured = Console(file=io.StringIO(), width=80, highlight=False, force_terminal=True, color_system="truecolor",
                       legacy_windows=False)
    tables.print_run(coloured, study_run)
    assert re.sub(r"\x1b\[[0-9;]*m", "", text_of(coloured)) == run_text(study_run, 80)
