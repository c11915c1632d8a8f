"""HDF5 into records: the inverse of `layout`, for a file that the guard has opened."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

import numpy as np

from frg.errors import Outcome, StoreError
from frg.records import Extrapolation, FixedPoint, Growth, Inputs, Profile, Run, Step, Track, Verdict
from frg.store import canonical, guard

if TYPE_CHECKING:
    import h5py


def read_run(file: h5py.File) -> Run:
    """The run with its committed steps, the status as written. Raises StoreError or whatever h5py does."""
    truncation, regulator = guard.group(file, "truncation"), guard.group(file, "regulator")
    inputs = Inputs(
        title=guard.text(file, "title"),
        truncation_text=guard.text(truncation, "text"),
        parameters=_mapping(truncation, "parameters"),
        equations=guard.text(truncation, "equations"),
        latex=guard.text(truncation, "latex"),
        regulator=guard.text(regulator, "name"),
        regulator_parameters=_mapping(regulator, "parameters"),
        settings=_mapping(guard.group(file, "settings"), "values"),
        signature=guard.text(file, "signature"),
    )
    return Run(
        inputs=canonical.inputs(inputs),
        command=guard.text(file, "command"),
        created_utc=guard.text(file, "created_utc"),
        frg_version=guard.text(file, "frg_version"),
        packages={name: str(version) for name, version in _mapping(file, "packages").items()},
        status=canonical.status(guard.text(file, "status")),
        steps=_read_steps(guard.group(file, "steps")),
        tracks=_read_tracks(file),
        verdict=_read_verdict(guard.group(file, "verdict")) if "verdict" in file else None,
    )


def uncommitted(file: h5py.File) -> tuple[str, ...]:
    """Names of step groups that are out of sequence or lack the commit marker."""
    steps = guard.group(file, "steps")
    return tuple(
        name
        for index, name in enumerate(sorted(steps))
        if name != f"{index:04d}" or not _committed(guard.group(steps, name))
    )


def _committed(group: h5py.Group) -> bool:
    return "committed" in group.attrs and guard.whole(group, "committed") == 1


def _read_steps(group: h5py.Group) -> tuple[Step, ...]:
    steps: list[Step] = []
    while f"{len(steps):04d}" in group:
        child = guard.group(group, f"{len(steps):04d}")
        if not _committed(child):
            break
        steps.append(_read_step(child))
    return tuple(steps)


def _read_step(group: h5py.Group) -> Step:
    word = guard.text(group, "outcome")
    try:
        outcome = Outcome.from_word(word)
    except ValueError:
        raise _bad(group, f"the outcome {word!r} is unknown") from None
    points = guard.group(group, "fixed_points")
    return canonical.step(
        Step(
            order=_mapping(group, "order"),
            outcome=outcome,
            fixed_points=tuple(_read_point(guard.group(points, str(i))) for i in range(len(points))),
            search=_mapping(group, "search"),
            seconds=guard.real(group, "seconds"),
            notes=_texts(group, "notes"),
        )
    )


def _read_point(group: h5py.Group) -> FixedPoint:
    eta = zip(guard.names(group, "field"), _values(group, "eta"), strict=True)
    return FixedPoint(
        label=guard.text(group, "label"),
        kind=guard.text(group, "kind"),
        names=guard.names(group, "coupling"),
        couplings=_values(group, "couplings"),
        eta={name: float(value) for name, value in eta},
        theta=_values(group, "theta"),
        right=_values(group, "right"),
        left=_values(group, "left"),
        theta_odd=_values(group, "theta_odd"),
        residual=guard.real(group, "residual"),
        condition=guard.real(group, "condition"),
        relevant=guard.whole(group, "relevant"),
        marginal=guard.whole(group, "marginal"),
        certified=bool(guard.whole(group, "certified")) if "certified" in group.attrs else None,
        notes=_texts(group, "notes"),
        landmarks=_mapping(group, "landmarks") if "landmarks" in group.attrs else {},
        profile=_read_profile(guard.group(group, "profile")) if "profile" in group else None,
    )


def _read_profile(group: h5py.Group) -> Profile:
    return Profile(
        x_label=guard.text(group, "x_label"),
        x=_values(group, "x"),
        potential=_values(group, "potential"),
        slope=_values(group, "slope"),
        eigenfunctions=_values(group, "eigenfunctions"),
    )


def _read_tracks(file: h5py.File) -> tuple[Track, ...]:
    if "tracks" not in file:
        return ()
    group = guard.group(file, "tracks")
    return tuple(canonical.track(_read_track(guard.group(group, str(i)))) for i in range(len(group)))


def _read_track(group: h5py.Group) -> Track:
    return Track(
        label=guard.text(group, "label"),
        rule=guard.text(group, "rule"),
        steps=_values(group, "step"),
        points=_values(group, "point"),
        theta=_values(group, "theta"),
        distance=_values(group, "distance"),
        next_distance=_values(group, "next_distance"),
        notes=_texts(group, "notes"),
    )


def _read_verdict(group: h5py.Group) -> Verdict:
    columns = [_values(group, f"exponent_{name}") for name in ("value", "error", "last")]
    return canonical.verdict(
        Verdict(
            counts=tuple(int(c) for c in _values(group, "counts")),
            settled_from=guard.whole(group, "settled_from") if "settled_from" in group.attrs else None,
            relevant=guard.whole(group, "relevant") if "relevant" in group.attrs else None,
            finite=guard.text(group, "finite"),
            reasons=_texts(group, "reasons"),
            exponents=tuple(
                Extrapolation(value=complex(v), error=float(e), last=complex(last))
                for v, e, last in zip(*columns, strict=True)
            ),
            growth=_read_growth(guard.group(group, "growth")) if "growth" in group else None,
        )
    )


def _read_growth(group: h5py.Group) -> Growth:
    return Growth(
        canonical=_values(group, "canonical"),
        entering=_values(group, "entering"),
        slope=guard.real(group, "slope"),
        offset=guard.real(group, "offset"),
        scatter=guard.real(group, "scatter"),
    )


def _values(group: h5py.Group, name: str) -> np.ndarray:
    values = np.asarray(guard.dataset(group, name)[()])
    if values.dtype.kind not in "biufc":
        raise _bad(group, f"dataset {name} holds no numbers")
    return values


def _json(holder: h5py.Group, name: str) -> Any:
    try:
        return json.loads(guard.text(holder, name))
    except (ValueError, RecursionError):
        raise _bad(holder, f"attribute {name} is no JSON") from None


def _mapping(holder: h5py.Group, name: str) -> dict[str, Any]:
    value = _json(holder, name)
    if not isinstance(value, dict):
        raise _bad(holder, f"attribute {name} is no JSON object")
    return value


def _texts(holder: h5py.Group, name: str) -> tuple[str, ...]:
    value = _json(holder, name)
    if not isinstance(value, list) or not all(isinstance(v, str) for v in value):
        raise _bad(holder, f"attribute {name} is no list of texts")
    return tuple(value)


def _bad(group: h5py.Group, message: str) -> StoreError:
    return StoreError(
        f"not a sound run file: {group.name}: {message}", remedy="restore it from a copy, or repeat the run"
    )
