"""Records as the JSON object of the command line: plain numbers, complex as [re, im], non-finite as null."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable
from fractions import Fraction
from typing import Any

from frg.records import FixedPoint, Growth, Run, Step, Track, Verdict

PLAIN_NUMBER = re.compile(r"[+-]?(?:\d{1,15}/\d{1,15}|\d{1,40}(?:\.\d{0,40})?(?:[eE][+-]?\d{1,3})?|\.\d{1,40})", re.ASCII)


def run_to_json(run: Run, path: str | None, *, command: str) -> dict[str, Any]:
    """The object printed by --json: `path` is where the run is kept (None: nowhere)."""
    inputs = run.inputs
    return {
        "frg": run.frg_version,
        "command": command,
        "run": path,
        "status": run.status,
        "signature": inputs.signature,
        "title": inputs.title,
        "parameters": {k: _number(v) for k, v in inputs.parameters.items()},
        "regulator": {"name": inputs.regulator, "parameters": _reals(inputs.regulator_parameters)},
        "steps": [step_to_json(s) for s in run.steps],
        "tracks": [_track(t) for t in run.tracks],
        "verdict": None if run.verdict is None else _verdict(run.verdict),
    }


def step_to_json(step: Step) -> dict[str, Any]:
    """One step with all its fixed points."""
    return {
        "order": {k: int(v) for k, v in step.order.items()},
        "outcome": step.outcome.word,
        "fixed_points": [point_to_json(p) for p in step.fixed_points],
        "search": {k: int(v) for k, v in step.search.items()},
        "seconds": _real(step.seconds),
        "notes": list(step.notes),
    }


def point_to_json(point: FixedPoint) -> dict[str, Any]:
    """One fixed point; theta sorted by falling real part."""
    return {
        "label": point.label,
        "kind": point.kind,
        "gaussian": point.gaussian,
        "couplings": {n: _real(c) for n, c in zip(point.names, point.couplings, strict=True)},
        "eta": _reals(point.eta),
        "residual": _real(point.residual),
        "theta": _complexes(point.theta),
        "theta_odd": _complexes(point.theta_odd),
        "relevant": int(point.relevant),
        "marginal": int(point.marginal),
        "certified": None if point.certified is None else bool(point.certified),
        "condition": _real(point.condition),
        "landmarks": _reals(point.landmarks),
        "notes": list(point.notes),
    }


def _track(track: Track) -> dict[str, Any]:
    return {
        "label": track.label,
        "rule": track.rule,
        "steps": [int(s) for s in track.steps],
        "points": [int(p) for p in track.points],
        "theta": [_complexes(row) for row in track.theta],
        "distance": [_real(d) for d in track.distance],
        "next_distance": [_real(d) for d in track.next_distance],
        "notes": list(track.notes),
    }


def _verdict(verdict: Verdict) -> dict[str, Any]:
    return {
        "counts": [int(c) for c in verdict.counts],
        "settled_from": _count(verdict.settled_from),
        "relevant": _count(verdict.relevant),
        "finite": verdict.finite,
        "reasons": list(verdict.reasons),
        "exponents": [
            {"value": _complex(e.value), "error": _real(e.error), "last": _complex(e.last)} for e in verdict.exponents
        ],
        "growth": None if verdict.growth is None else _growth(verdict.growth),
    }


def _growth(growth: Growth) -> dict[str, Any]:
    return {
        "canonical": [_real(x) for x in growth.canonical],
        "entering": [_real(x) for x in growth.entering],
        "slope": _real(growth.slope), "offset": _real(growth.offset), "scatter": _real(growth.scatter),
    }


def _count(value: int | None) -> int | None:
    return None if value is None else int(value)


def _real(value: float) -> float | None:
    number = float(value)
    return number if math.isfinite(number) else None


def _reals(values: dict[str, float]) -> dict[str, float | None]:
    return {k: _real(v) for k, v in values.items()}


def _complex(value: complex) -> list[float] | None:
    number = complex(value)
    if not (math.isfinite(number.real) and math.isfinite(number.imag)):
        return None
    return [number.real, number.imag]


def _complexes(values: Iterable[complex]) -> list[list[float] | None]:
    return [_complex(v) for v in values]


def _number(text: str) -> float | int | str:
    """A parameter's value as a number where its text is a plain one: "3" -> 3, "5/2" -> 2.5.

    Texts whose number is no double (1e999, or worse 1e999999999, whose digits would fill the memory) stay texts."""
    if not PLAIN_NUMBER.fullmatch(text):
        return text
    try:
        value = Fraction(text)
        number = float(value)
    except (ValueError, ZeroDivisionError, OverflowError):
        return text
    return int(value) if value.denominator == 1 and abs(number) < 2.0**53 else number
