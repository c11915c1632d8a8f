"""The --json object: complete, unrounded, and JSON without extensions."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from frg.records import Run
from frg.show.jsonview import run_to_json

KEYS = {"frg", "command", "run", "signature", "parameters", "regulator", "steps", "tracks", "verdict", "status"}
POINT_KEYS = {
    "label", "kind", "gaussian", "couplings", "eta", "residual", "theta", "theta_odd", "relevant", "marginal",
    "certified", "condition", "landmarks", "notes",
}


def through_text(run: Run, path: str | None = None) -> dict[str, Any]:
    read: dict[str, Any] = json.loads(json.dumps(run_to_json(run, path, command="converge"), allow_nan=False))
    return read


def test_has_every_key_of_the_contract(study_run: Run) -> None:
    shown = through_text(study_run, "runs/a.h5")
    assert set(shown) >= KEYS
    assert (shown["frg"], shown["command"], shown["run"]) == ("0.1.0", "converge", "runs/a.h5")
    assert (shown["signature"], shown["status"]) == (study_run.inputs.signature, "complete")
    assert shown["regulator"] == {"name": "exponential", "parameters": {"alpha": 2.0, "s": 1.0}}
    assert len(shown["steps"]) == 11
    for step in shown["steps"]:
        assert set(step) >= {"order", "outcome", "fixed_points", "search", "notes", "seconds"}
        assert all(set(p) == POINT_KEYS for p in step["fixed_points"])
    assert shown["steps"][2]["order"] == {"n": 4} and shown["steps"][2]["outcome"] == "found"
    assert set(shown["tracks"][0]) == {"label", "rule", "steps", "points", "theta", "distance", "next_distance", "notes"}
    assert set(shown["verdict"]) == {"counts", "settled_from", "relevant", "finite", "reasons", "exponents", "growth"}


def test_floats_are_not_rounded(study_run: Run) -> None:
    shown = through_text(study_run)
    for step, record in zip(shown["steps"], study_run.steps, strict=True):
        for point, original in zip(step["fixed_points"], record.fixed_points, strict=True):
            assert list(point["couplings"]) == list(original.names)
            assert np.array_equal(list(point["couplings"].values()), original.couplings)
            assert np.array_equal([complex(*t) for t in point["theta"]], original.theta)
            assert np.array_equal([complex(*t) for t in point["theta_odd"]], original.theta_odd)


def test_what_is_not_finite_is_null(study_run: Run) -> None:
    shown = through_text(study_run)
    assert shown["tracks"][0]["theta"][0][1] is not None and shown["tracks"][0]["theta"][0][2] is None
    assert shown["tracks"][0]["next_distance"][:2] == [None, 0.02]
    assert shown["verdict"]["exponents"][3] == {"value": None, "error": None, "last": [-5.9, 0.0]}
    assert shown["verdict"]["exponents"][2]["value"] == [-3.625, 1.27]
    assert shown["verdict"]["growth"]["scatter"] is None and shown["verdict"]["growth"]["entering"][3] is None
    step = study_run.steps[0]
    bad = replace(
        step.fixed_points[0], residual=math.inf, condition=math.nan, eta={"phi": math.nan}, landmarks={"box": math.inf}
    )
    point = through_text(replace(study_run, steps=(replace(step, fixed_points=(bad,)),)))["steps"][0]["fixed_points"][0]
    assert point["residual"] is None and point["condition"] is None
    assert point["eta"] == {"phi": None} and point["landmarks"] == {"box": None}


def test_numbers_of_arrays_are_numbers(study_run: Run) -> None:
    step = study_run.steps[0]
    point = replace(step.fixed_points[0], relevant=np.int64(1), marginal=np.int64(0), certified=np.bool_(False))
    assert study_run.verdict is not None
    verdict = replace(study_run.verdict, counts=tuple(np.array([1, -1])), settled_from=np.int64(2), relevant=np.int64(1))
    search = {"starts": np.int64(4)}
    run = replace(
        study_run, verdict=verdict,
        steps=(replace(step, order={"n": np.int64(2)}, search=search, fixed_points=(point,)),),  # type: ignore[dict-item]
    )
    shown = through_text(run)
    assert shown["steps"][0]["search"] == {"starts": 4} and shown["steps"][0]["fixed_points"][0]["certified"] is False
    assert (shown["verdict"]["counts"], shown["verdict"]["settled_from"]) == ([1, -1], 2)


def test_without_a_verdict(study_run: Run) -> None:
    shown = through_text(replace(study_run, verdict=None, tracks=(), steps=()))
    assert (shown["verdict"], shown["tracks"], shown["steps"], shown["run"]) == (None, [], [], None)


def parameter(run: Run, text: str) -> Any:
    inputs = replace(run.inputs, parameters={"p": text})
    return through_text(replace(run, inputs=inputs))["parameters"]["p"]


@pytest.mark.parametrize("text, value", [
    ("3", 3), ("5/2", 2.5), ("-2", -2), ("2.50", 2.5), ("1/3", 1 / 3), ("1e-3", 0.001), (".5", 0.5), ("sqrt(2)", "sqrt(2)"),
    ("1/0", "1/0"), ("nan", "nan"), ("inf", "inf"), ("1_000", "1_000"), ("\u0663", "\u0663"), ("", ""),
    ("1e999", "1e999"), ("1e999999999", "1e999999999"), ("9" * 5000, "9" * 5000), ("1e300", 1e300),
])
def test_parameters_are_numbers_where_their_text_is_one(study_run: Run, text: str, value: object) -> None:
    shown = parameter(study_run, text)
    assert shown == value and type(shown) is type(value)


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_printed_double_comes_back(value: float) -> None:
    from frg.show.jsonview import _number

    assert _number(repr(value)) == value
