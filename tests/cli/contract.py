"""The shape of the JSON objects of the command line: every key, every type."""

from __future__ import annotations

import math
from typing import Any

KINDS = {"gaussian", "physical", "spurious"}
OUTCOMES = {"found", "none found", "not converged", "non finite", "ill conditioned"}


def number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)


def complex_pair(value: Any) -> bool:
    return isinstance(value, list) and len(value) == 2 and all(number(v) for v in value)


def numbers_by_name(value: Any) -> bool:
    return isinstance(value, dict) and all(isinstance(k, str) and (v is None or number(v)) for k, v in value.items())


def texts(value: Any) -> bool:
    return isinstance(value, list) and all(isinstance(v, str) and v for v in value)


def count(value: Any) -> bool:
    return isinstance(value, int) and not isinstance(value, bool) and value >= 0


def check_run_object(found: dict[str, Any], command: str) -> None:
    """What `solve`, `converge` and `show` print."""
    assert set(found) == {
        "frg", "command", "run", "status", "signature", "title", "parameters", "regulator", "steps", "tracks", "verdict"
    }
    assert found["command"] == command and isinstance(found["frg"], str) and found["frg"]
    assert found["run"] is None or (isinstance(found["run"], str) and found["run"].endswith(".h5"))
    assert found["status"] in {"complete", "interrupted", "failed", "running"}
    assert len(found["signature"]) == 64 and int(found["signature"], 16) >= 0
    assert isinstance(found["title"], str) and isinstance(found["parameters"], dict)
    assert set(found["regulator"]) == {"name", "parameters"} and numbers_by_name(found["regulator"]["parameters"])
    assert isinstance(found["steps"], list)
    for step in found["steps"]:
        check_step(step)
    for track in found["tracks"]:
        check_track(track, found["steps"])
    if found["verdict"] is not None:
        check_verdict(found["verdict"], found["steps"])


def check_step(step: dict[str, Any]) -> None:
    assert set(step) == {"order", "outcome", "fixed_points", "search", "seconds", "notes"}
    assert all(isinstance(k, str) and count(v) for k, v in step["order"].items())
    assert step["outcome"] in OUTCOMES and number(step["seconds"]) and step["seconds"] > 0 and texts(step["notes"])
    assert all(count(v) for v in step["search"].values())
    assert (step["outcome"] == "found") == bool(step["fixed_points"])
    labels = [point["label"] for point in step["fixed_points"]]
    assert len(set(labels)) == len(labels)
    for point in step["fixed_points"]:
        check_point(point)


def check_point(point: dict[str, Any]) -> None:
    assert set(point) == {
        "label", "kind", "gaussian", "couplings", "eta", "residual", "theta", "theta_odd", "relevant", "marginal",
        "certified", "condition", "landmarks", "notes",
    }
    assert isinstance(point["label"], str) and point["label"]
    assert point["kind"] in KINDS and point["gaussian"] is (point["kind"] == "gaussian")
    assert point["couplings"] and all(number(v) for v in point["couplings"].values())
    assert numbers_by_name(point["eta"]) and numbers_by_name(point["landmarks"]) and texts(point["notes"])
    assert number(point["residual"]) and 0 <= point["residual"] < 1e-8
    assert point["condition"] is None or point["condition"] >= 1
    assert point["certified"] in (None, True, False)
    assert all(complex_pair(t) for t in [*point["theta"], *point["theta_odd"]])
    real = [t[0] for t in point["theta"]]
    assert len(real) == len(point["couplings"])
    assert all(a >= b - 1e-9 * max(1.0, abs(a)) for a, b in zip(real, real[1:], strict=False))
    assert count(point["relevant"]) and count(point["marginal"])
    # tolerance of a marginal direction: frg/cli/settings.py
    assert point["relevant"] == sum(r > 1e-6 for r in real) and point["marginal"] == sum(abs(r) <= 1e-6 for r in real)


def check_track(track: dict[str, Any], steps: list[dict[str, Any]]) -> None:
    assert set(track) == {"label", "rule", "steps", "points", "theta", "distance", "next_distance", "notes"}
    assert isinstance(track["label"], str) and isinstance(track["rule"], str) and track["rule"] and texts(track["notes"])
    length = len(track["steps"])
    assert track["steps"] == sorted(set(track["steps"])) and length > 0
    assert all(len(track[key]) == length for key in ("points", "theta", "distance", "next_distance"))
    for step, point, row in zip(track["steps"], track["points"], track["theta"], strict=True):
        followed = steps[step]["fixed_points"][point]["theta"]
        present = [t for t in row if t is not None]
        assert all(complex_pair(t) for t in present)
        # a direction's exponent is one of the point's, to the last bit
        assert all(t in followed for t in present)
    for value in [*track["distance"], *track["next_distance"]]:
        assert value is None or (number(value) and value >= 0)


def check_verdict(verdict: dict[str, Any], steps: list[dict[str, Any]]) -> None:
    assert set(verdict) == {"counts", "settled_from", "relevant", "finite", "reasons", "exponents", "growth"}
    assert len(verdict["counts"]) == len(steps) and all(isinstance(c, int) and c >= -1 for c in verdict["counts"])
    assert verdict["finite"] in {"supported", "not supported", "undecided"} and texts(verdict["reasons"])
    assert verdict["settled_from"] is None or count(verdict["settled_from"])
    assert verdict["relevant"] is None or count(verdict["relevant"])
    for exponent in verdict["exponents"]:
        assert set(exponent) == {"value", "error", "last"}
        assert complex_pair(exponent["value"]) and complex_pair(exponent["last"])
        assert exponent["error"] is None or exponent["error"] >= 0
    if verdict["growth"] is not None:
        growth = verdict["growth"]
        assert set(growth) == {"canonical", "entering", "slope", "offset", "scatter"}
        assert len(growth["canonical"]) == len(growth["entering"])
