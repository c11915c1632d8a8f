"""Tables for papers and for other programs."""

from __future__ import annotations

import csv
import io
import math
import re
from dataclasses import replace

import numpy as np

from frg.records import Extrapolation, Run
from frg.show.latex import escape, study_csv, study_table


def rows(text: str) -> list[list[str]]:
    lines = [line.removesuffix(r"\\") for line in text.splitlines() if line.endswith(r"\\")]
    return [[cell.strip() for cell in line.split(" & ")] for line in lines]


def test_one_row_an_order_and_the_limit(study_run: Run) -> None:
    table = rows(study_table(study_run))
    assert len(table) == 1 + 11 + 1 and all(len(row) == 4 for row in table)
    assert [row[0] for row in table[1:-1]] == [str(n) for n in range(2, 13)]
    assert table[3] == ["4", "1", "0.6463374331", r"1.5472, $-$0.6245, $-$3.625$\pm$1.27i"]
    assert table[-1] == [r"$\infty$", "1", "0.64956177(3)", r"1.53949946(7), $-$0.6557459(5), $-$3.625(2)$\pm$1.270(2)i"]


def test_is_well_formed_and_plain(study_run: Run) -> None:
    """No package needed: ASCII, the tabular closed, dollars in pairs, no rules of booktabs."""
    text = study_table(study_run)
    assert text.isascii() and "rule" not in text
    assert text.startswith(r"\begin{tabular}{rrrl}") and text.endswith(r"\end{tabular}")
    assert all(line.count("$") % 2 == 0 for line in text.splitlines())
    assert text.count("{") == text.count("}")
    assert set(re.findall(r"\\([a-z]+)", text)) <= {"begin", "end", "hline", "nu", "theta", "infty", "pm", "dots"}


def test_undecided_and_unfinished_studies(study_run: Run) -> None:
    assert study_run.verdict is not None
    undecided = replace(study_run, verdict=replace(study_run.verdict, relevant=None, settled_from=None))
    assert rows(study_table(undecided))[-1][1] == "--"
    assert r"\infty" not in study_table(replace(study_run, verdict=None))
    assert len(rows(study_table(replace(study_run, steps=(), tracks=(), verdict=None)))) == 1


def test_a_pair_in_the_limit_is_written_once(study_run: Run) -> None:
    pair = tuple(Extrapolation(value=complex(2, s), error=0.01, last=complex(2, s)) for s in (1.5, -1.5))
    third = Extrapolation(value=-1 + 0j, error=math.inf, last=-1 + 0j)
    assert study_run.verdict is not None
    table = rows(study_table(replace(study_run, verdict=replace(study_run.verdict, exponents=(*pair, third)))))
    assert table[-1][2:] == ["--", r"2.000(10)$\pm$1.500(10)i, $-$1 (error unknown)"]


def test_special_signs() -> None:
    assert escape("a_b & 50% #1 {x} ~^$\\") == (
        r"a\_b \& 50\% \#1 \{x\} \textasciitilde{}\textasciicircum{}\$\textbackslash{}"
    )
    assert escape("-") == "--" and escape("-1 ± 2") == r"$-$1 $\pm$ 2"


def test_csv_holds_every_number_in_full(study_run: Run) -> None:
    table = list(csv.DictReader(io.StringIO(study_csv(study_run))))
    for step in study_run.steps:
        for point in step.fixed_points:
            mine = [r for r in table if r["order"] == f"n={step.order['n']}" and r["label"] == point.label]
            by = {q: [r for r in mine if r["quantity"] == q] for q in ("coupling", "theta", "theta odd", "eta", "landmark")}
            assert len(mine) == sum(map(len, by.values()))
            assert [r["name"] for r in by["coupling"]] == list(point.names)
            assert np.array_equal([float(r["real"]) for r in by["coupling"]], point.couplings)
            for quantity, values in (("theta", point.theta), ("theta odd", point.theta_odd)):
                assert np.array_equal([complex(float(r["real"]), float(r["imaginary"])) for r in by[quantity]], values)
            assert {r["name"]: float(r["real"]) for r in by["eta"]} == point.eta
            assert {r["name"]: float(r["real"]) for r in by["landmark"]} == point.landmarks
            assert all(float(r["residual"]) == point.residual and r["kind"] == point.kind for r in mine)


def test_csv_of_array_numbers_and_awkward_labels(study_run: Run) -> None:
    step = study_run.steps[0]
    point = replace(step.fixed_points[0], label='a, "b"', residual=np.float64(1e-15), condition=np.float64(3.0))
    text = study_csv(replace(study_run, steps=(replace(step, fixed_points=(point,)),)))
    assert "float64" not in text
    assert {r["label"] for r in csv.DictReader(io.StringIO(text))} == {'a, "b"'}
