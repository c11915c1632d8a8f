"""The report: one page that needs nothing else, says what the records say, and never turns their text into markup."""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import replace
from html.parser import HTMLParser
from importlib import resources
from pathlib import Path

import numpy as np
import pytest
from fakes import EQUATIONS, LATEX, TRUNCATION, inputs, interrupted, rootless, solved, study, verdict
from hypothesis import given, settings
from hypothesis import strategies as st

from frg.records import Run
from frg.show.equations import LONGEST, abbreviated, broken, equation_rows
from frg.show.report import render_report, write_report

VOID = {"meta", "br", "hr", "img", "input", "link"}
HOSTILE = '</pre></title><script>alert("1")</script><img src=x onerror=alert(2)> {{ 7*7 }} & "\' <!-- --> ]]>'


class Page(HTMLParser):
    """Tags, attributes and text of a page; complains of tags that do not match."""

    def __init__(self, text: str):
        super().__init__(convert_charrefs=True)
        self.open: list[str] = []
        self.tags: Counter[str] = Counter()
        self.attributes: list[tuple[str, str, str]] = []
        self.pieces: list[str] = []
        self.feed(text)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.handle_startendtag(tag, attrs)
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags[tag] += 1
        self.attributes += [(tag, name, value or "") for name, value in attrs]

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        if not self.open or self.open[-1] != "style":
            self.pieces.append(data)

    @property
    def text(self) -> str:
        return "".join(self.pieces)


RUNS = {
    "study": study(), "interrupted": interrupted(), "solved": solved(), "rootless": rootless(),
    "just started": replace(study(), status="running", steps=(), tracks=(), verdict=None),
}


@pytest.mark.parametrize("run", RUNS.values(), ids=RUNS.keys())
def test_the_page_is_whole_and_needs_nothing_else(run: Run):
    page = Page(render_report(run))
    assert not {"script", "link", "iframe", "object", "img", "metadata"} & set(page.tags)
    for tag, name, value in page.attributes:
        assert not name.startswith("on"), (tag, name)
        if name.endswith("href") or name in ("src", "action"):
            assert value.startswith("#"), (tag, name, value)
        if name in ("style", "clip-path", "fill", "filter"):
            assert re.fullmatch(r"url\(#[^)]*\)", value) or "url(" not in value.replace("url(#", "")
    identities = Counter(value for _, name, value in page.attributes if name == "id")
    assert max(identities.values()) == 1, identities.most_common(3)
    pointed = {v[1:] for _, n, v in page.attributes if n.endswith("href")}
    pointed |= {v for _, n, v in page.attributes if n == "aria-labelledby"}
    assert pointed <= set(identities)
    style = render_report(run).split("<style>")[1].split("</style>")[0]
    assert "url(" not in style and "@import" not in style


def test_the_verdict_comes_first_with_its_reasons_and_says_that_it_is_no_proof():
    text = Page(render_report(study())).text
    assert "A finite number of relevant directions is supported: 1 relevant, settled from order 2." in text
    for reason in verdict().reasons:
        assert text.index("Verdict") < text.index(reason) < text.index("Order by order")
    assert text.count("not a proof") == 1
    told = replace(study(), verdict=replace(verdict(), reasons=("this is evidence, not proof",)))
    assert "not a proof" not in Page(render_report(told)).text


def test_runs_without_verdict_say_so():
    assert "There is no verdict: the study is interrupted." in Page(render_report(interrupted())).text
    assert "One order was solved; there is no convergence study" in Page(render_report(solved())).text
    assert "No order has been committed yet." in Page(render_report(RUNS["just started"])).text


def test_what_was_found_tried_and_noted_is_told_by_step():
    run = study()
    text = Page(render_report(run)).text
    for step in run.steps:
        assert f"remark at {step.order['n']}" in text
    assert text.count("321 starts, 40 converged, 17 failed") == len(run.steps)
    assert "minimum = 0.0306" in text and "note on S" in text and "phi: 0.0361" in text
    assert rootless().steps[0].outcome.value in Page(render_report(rootless())).text


def test_every_coupling_of_a_long_list_is_there():
    names = tuple(f"g{i}" for i in range(9))
    run = solved()
    p = run.steps[0].fixed_points[0]
    long = replace(p, names=names, couplings=p.couplings[0] * 2.0 ** np.arange(9))
    text = Page(render_report(replace(run, steps=(replace(run.steps[0], fixed_points=(long,)),)))).text
    for name, value in zip(names, long.couplings, strict=True):
        assert text.count(f"{name} = {value:.10g}") == 1
    assert "…" not in text[text.index("couplings") : text.index("landmarks")]


def test_provenance_and_truncation_are_verbatim():
    run = study()
    text = Page(render_report(run)).text
    for piece in (run.command, run.created_utc, run.inputs.signature, "numpy 2.4", "d = 3, N = 1/2",
                  "exponential (alpha = 2, s = 1)", '"starts": 321', TRUNCATION, EQUATIONS, LATEX):
        assert piece in text


def test_pictures_have_words_for_those_who_do_not_see_them():
    page = Page(render_report(study()))
    labels = [v for t, n, v in page.attributes if t == "svg" and n == "aria-label"]
    assert len(labels) == page.tags["figure"] == 6 and all(labels) and len(set(labels)) == 6
    assert "Potential and slope at fixed point A (the tracked one, at the last order)." in labels
    assert "Potential and slope at fixed point A." in Page(render_report(solved())).text
    equations = [v for t, n, v in page.attributes if t == "div" and n == "aria-label"]
    assert equations == EQUATIONS.splitlines()


def test_text_from_strangers_never_becomes_markup():
    run = study()
    point = replace(run.steps[0].fixed_points[0], label=HOSTILE, names=(HOSTILE, "b"), notes=(HOSTILE,),
                    landmarks={HOSTILE: 1.0}, eta={HOSTILE: 0.5})
    step = replace(run.steps[0], order={HOSTILE: 2}, fixed_points=(point,), search={HOSTILE: 1}, notes=(HOSTILE,))
    track = replace(run.tracks[0], steps=run.tracks[0].steps[:1], points=run.tracks[0].points[:1],
                    theta=run.tracks[0].theta[:1], label=HOSTILE, rule=HOSTILE, notes=(HOSTILE,))
    bad = replace(
        run, command=HOSTILE, created_utc=HOSTILE, frg_version=HOSTILE, packages={HOSTILE: HOSTILE}, steps=(step, step),
        tracks=(track,), verdict=replace(verdict(), counts=(1, 1), reasons=(HOSTILE,), finite=HOSTILE),
        inputs=replace(inputs(title=HOSTILE, truncation_text=HOSTILE, equations=HOSTILE + "\nx", latex=HOSTILE + "\nx"),
                       parameters={HOSTILE: HOSTILE}, regulator=HOSTILE, regulator_parameters={HOSTILE: 1.0},
                       settings={HOSTILE: HOSTILE}, signature=HOSTILE),
    )
    source = render_report(bad)
    page = Page(source)
    assert not {"script", "img"} & set(page.tags)
    assert set(page.tags) <= set(Page(render_report(study())).tags)
    assert not [name for _, name, _ in page.attributes if name.startswith("on")]
    assert "<!-- -->" not in source and "49" not in page.text.split("Verdict")[0]
    assert page.text.count(HOSTILE) > 15


def test_equations_are_typeset_and_what_is_not_understood_stays_text():
    assert all(equation_rows(line) for line in LATEX.splitlines())
    assert equation_rows(r"x = \notacommand{y}") is None
    assert equation_rows(r"x = \frac{1}{") is None
    assert equation_rows("x + " * LONGEST) is None
    run = replace(study(), inputs=inputs(latex="x = \\notacommand{y}\n\\eta = 0", equations="x = y, in words\neta = 0"))
    source = render_report(run)
    assert '<pre class="equation">x = y, in words</pre>' in source
    assert 'aria-label="eta = 0"' in source


def test_long_equations_are_broken_at_signs_outside_of_brackets():
    term = r"\left(a - b\right) c_{1 - 2}"
    rows = broken("y = " + " + ".join([term] * 20))
    assert len(rows) == 3
    assert all(row.startswith("+") for row in rows[1:])
    assert all(row.count(r"\left") == row.count(r"\right") for row in rows)
    assert broken("y = - a + b") == ["y = - a + b"]


def test_letters_stand_for_what_is_too_long_to_break():
    total = " + ".join(f"a_{{{i}}} b c d" for i in range(30))
    latex = rf"y = x + \frac{{2 \left(p + \frac{{q}}{{{total}}}\right)^{{2}} \left({total}\right)}}{{d}} - \left(d - 2\right)"
    parts = abbreviated(latex)
    assert len(parts) == 4
    assert len(parts[0]) < 150 and r"\left(d - 2\right)" in parts[0]
    whole = parts[0]
    for part in parts[1:]:
        letter, inner = part.split(" = ", 1)
        assert whole.count(letter) == 1
        bracket = rf"\left({inner}\right)"
        whole = whole.replace(f"{{{letter}}}", f"{{{inner}}}").replace(letter, bracket)
    assert whole == latex
    assert all(len(row) < 400 for part in parts for row in broken(part))
    assert abbreviated(LATEX.splitlines()[0]) == [LATEX.splitlines()[0]]
    assert equation_rows(latex) is not None


@given(st.text(alphabet=r"ab+-={}()[]^_' \leftrightfrac", max_size=200), st.integers(1, 80))
@settings(max_examples=200, deadline=None)
def test_breaking_loses_nothing(latex: str, width: int):
    assert "".join(broken(latex, width)) == latex


PIECES = [*r"ab+-={}()[]^_'$%&\~<", r"\frac", r"\left(", r"\right)", r"\text{", "{a}", " "]


@given(st.lists(st.sampled_from(PIECES), max_size=30).map("".join))
@settings(max_examples=60, deadline=None)
def test_no_text_breaks_the_typesetter(latex: str):
    rows = equation_rows(latex)
    assert rows is None or all(row.startswith("<svg") for row in rows)


def test_the_page_is_the_same_every_time_and_written_whole(tmp_path: Path):
    target = tmp_path / "deeper" / "report.html"
    write_report(study(), target)
    assert target.read_text(encoding="utf-8") == render_report(study()) == render_report(study())
    assert [p.name for p in target.parent.iterdir()] == ["report.html"]
    (tmp_path / "folder.html").mkdir()
    with pytest.raises(OSError):
        write_report(study(), tmp_path / "folder.html")
    assert sorted(p.name for p in tmp_path.iterdir()) == ["deeper", "folder.html"]


def _luminance(colour: str) -> float:
    channels = [c / 255 for c in bytes.fromhex(colour[1:])]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_text_stands_out_in_light_dark_and_print():
    """Contrast of at least 4.5, as W3C, Web Content Accessibility Guidelines 2.1 (2018), 1.4.3 asks for."""
    template = resources.files("frg.show").joinpath("report.html").read_text(encoding="utf-8")
    palettes = [dict(re.findall(r"--(\w+): (#\w{6})", block)) for block in re.findall(r":root \{([^}]*)\}", template)]
    assert len(palettes) == 3
    for palette in palettes:
        for ink in ("ink", "soft", "accent"):
            for ground in ("page", "panel"):
                pair = sorted((_luminance(palette[ink]), _luminance(palette[ground])))
                assert (pair[1] + 0.05) / (pair[0] + 0.05) >= 4.5, (ink, ground, palette)
