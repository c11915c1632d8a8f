"""Records in notebooks: escaped HTML, switched on by a call."""

from __future__ import annotations

import sys
from dataclasses import replace
from html.parser import HTMLParser
from types import ModuleType, SimpleNamespace
from typing import Any

import pytest

from frg.errors import FrgError
from frg.records import FixedPoint, Run, Step, Verdict
from frg.show.notebook import enable, html_for


class Reader(HTMLParser):
    """Tags in balance, and the text between them."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.tags: set[str] = set()
        self.words = ""
        self.feed(text)
        self.close()
        assert not self.open

    def handle_starttag(self, tag: str, attrs: Any) -> None:
        self.open.append(tag)
        self.tags.add(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.words += data


def test_a_study_shows_header_table_and_verdict(study_run: Run) -> None:
    page = Reader(html_for(study_run))
    assert page.tags == {"pre", "table", "tr", "th", "td"}
    assert html_for(study_run).count("<tr>") == 12
    for words in ("Ising, local", "regulator exponential", "0.6495596506", ">1000x", "settled from order 2", "0.64956177(3)"):
        assert words in page.words


def test_a_solve_shows_its_fixed_points(study_run: Run) -> None:
    page = Reader(html_for(replace(study_run, steps=study_run.steps[:1], tracks=(), verdict=None)))
    assert "table" not in page.tags and "regulator exponential" in page.words and "G  gaussian" in page.words


def test_step_point_and_verdict(study_run: Run) -> None:
    step = study_run.steps[3]
    shown = Reader(html_for(step)).words
    assert all(words in shown for words in ("n = 5", "found", "A  physical", "S1  spurious", "400 starts", "set aside"))
    assert "U_min = " in Reader(html_for(step.fixed_points[0])).words
    assert study_run.verdict is not None
    assert "supported" in Reader(html_for(study_run.verdict)).words
    assert Reader(html_for(replace(study_run, verdict=None))).tags >= {"table"}


def test_everything_is_escaped(study_run: Run) -> None:
    hostile = "<script>alert('x')</script> & \"y\""
    point = replace(study_run.steps[0].fixed_points[0], label=hostile, notes=(hostile,), eta={hostile: 0.0},
                    names=(hostile, "U2"), landmarks={hostile: 1.0})
    step = replace(study_run.steps[0], fixed_points=(point,), notes=(hostile,), search={hostile: 1})
    assert study_run.verdict is not None
    verdict = replace(study_run.verdict, reasons=(hostile,))
    inputs = replace(study_run.inputs, title=hostile, regulator=hostile, parameters={hostile: hostile})
    run = replace(study_run, inputs=inputs, verdict=verdict)
    solved = replace(run, steps=(step,), tracks=(), verdict=None)
    for record in (run, solved, step, point, verdict):
        page = Reader(html_for(record))
        assert "script" not in page.tags and hostile in page.words


def test_enable_registers_the_four_records(monkeypatch: pytest.MonkeyPatch, study_run: Run) -> None:
    known: dict[type, Any] = {}
    formatter = SimpleNamespace(for_type=known.__setitem__)
    shell = SimpleNamespace(display_formatter=SimpleNamespace(formatters={"text/html": formatter}))
    notebook = ModuleType("IPython")
    notebook.get_ipython = lambda: shell  # type: ignore[attr-defined]
    monkeypatch.setitem(sys.modules, "IPython", notebook)
    enable()
    assert set(known) == {Run, Step, FixedPoint, Verdict}
    assert known[Run](study_run) == html_for(study_run)


@pytest.mark.parametrize("installed", [False, True])
def test_enable_outside_of_a_notebook_says_so(monkeypatch: pytest.MonkeyPatch, installed: bool) -> None:
    notebook: Any = None
    if installed:
        notebook = ModuleType("IPython")
        notebook.get_ipython = lambda: None
    monkeypatch.setitem(sys.modules, "IPython", notebook)
    with pytest.raises(FrgError, match="no notebook"):
        enable()
