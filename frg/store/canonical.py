"""Records in the form that is stored: plain values, owned arrays of fixed type, shapes checked.

Both stores pass every record through here, so that what is read back equals what was handed in to
the last bit, whatever the store.
"""

from __future__ import annotations

import json
import math
import numbers
import operator
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from frg.errors import StoreError
from frg.records import Extrapolation, FixedPoint, Growth, Inputs, Profile, Step, Track, Verdict

STATUSES = ("running", "complete", "interrupted", "failed")
KINDS = ("gaussian", "physical", "spurious")
FINITE = ("supported", "not supported", "undecided")
MAX_DEPTH = 12


def text(value: object, what: str) -> str:
    """`value` if it is a string that HDF5 can hold; StoreError otherwise."""
    if not isinstance(value, str):
        raise _unfit(f"{what} is {type(value).__name__}, not text")
    if "\0" in value:
        raise _unfit(f"{what} contains a NUL character")
    try:
        value.encode("utf-8")
    except UnicodeEncodeError:
        raise _unfit(f"{what} contains a lone surrogate, which is no text") from None
    return value


def plain(value: object, what: str, depth: int = 0) -> Any:
    """`value` as JSON can hold it: None, bool, int, float, text, lists and dictionaries of these.

    Exact rationals become text ("1/3"), tuples lists, numpy scalars Python numbers. Raises StoreError for
    anything else: a setting that cannot be written down cannot be repeated from the file."""
    if depth > MAX_DEPTH:
        raise _unfit(f"{what} is nested deeper than {MAX_DEPTH} levels")
    if isinstance(value, np.generic):
        value = value.item()
    if value is None or isinstance(value, bool):
        return value
    if isinstance(value, str):
        return text(value, what)
    if isinstance(value, int):
        return int(value)
    if isinstance(value, float):
        return _json_float(value)
    if isinstance(value, numbers.Rational):
        return str(value)
    if isinstance(value, Mapping):
        return {text(k, f"a key of {what}"): plain(v, f"{what}.{k}", depth + 1) for k, v in value.items()}
    if isinstance(value, np.ndarray):
        value = value.tolist()
    if isinstance(value, (list, tuple)):
        return [plain(v, what, depth + 1) for v in value]
    raise _unfit(f"{what} is a {type(value).__name__}, which has no plain form")


def _json_float(value: float) -> float:
    """JSON by repr keeps every float bit for bit, but knows one NaN only."""
    return math.nan if math.isnan(value) else float(value)


def to_json(value: object, what: str) -> str:
    """One line of JSON; floats by repr, so that they come back bit for bit."""
    return text(json.dumps(plain(value, what), ensure_ascii=False), what)


def array(values: object, dtype: type, shape: tuple[int | None, ...], what: str) -> np.ndarray:
    """A read-only copy of type `dtype`; None in `shape` stands for any length. StoreError if unfit."""
    result = np.asarray(values)
    allowed = {"c": "biufc", "f": "biuf", "i": "iu"}[np.dtype(dtype).kind]
    if result.dtype.kind not in allowed and result.size:
        raise _unfit(f"{what} has type {result.dtype}, expected {np.dtype(dtype)}")
    if len(result.shape) != len(shape) or any(
        want not in (None, have) for have, want in zip(result.shape, shape, strict=True)
    ):
        raise _unfit(
            f"{what} has shape {result.shape}, expected {tuple('any' if s is None else s for s in shape)}"
        )
    copy: np.ndarray = result.astype(dtype, order="C", copy=True)
    copy.flags.writeable = False
    return copy


def inputs(given: Inputs) -> Inputs:
    """`Inputs` with plain settings and parameters."""
    return replace(
        given,
        title=text(given.title, "the title"),
        truncation_text=text(given.truncation_text, "the truncation text"),
        parameters=_texts(given.parameters, "the parameters"),
        equations=text(given.equations, "the equations"),
        latex=text(given.latex, "the LaTeX text"),
        regulator=text(given.regulator, "the regulator"),
        regulator_parameters={
            name: _json_float(value)
            for name, value in _reals(given.regulator_parameters, "the regulator parameters").items()
        },
        settings=plain(given.settings, "the settings"),
        signature=text(given.signature, "the signature"),
    )


def step(given: Step) -> Step:
    """`Step` with plain values and owned arrays."""
    return replace(
        given,
        order=_whole(given.order, "the order"),
        fixed_points=tuple(fixed_point(p) for p in given.fixed_points),
        search=_whole(given.search, "the search counts"),
        seconds=float(given.seconds),
        notes=_notes(given.notes),
    )


def fixed_point(given: FixedPoint) -> FixedPoint:
    """`FixedPoint` with plain values and owned arrays whose shapes agree."""
    name = f"fixed point {given.label!r}"
    names = tuple(text(n, f"a coupling name of {name}") for n in given.names)
    n = len(names)
    theta = array(given.theta, np.complex128, (None,), f"theta of {name}")
    m = len(theta)
    if given.kind not in KINDS:
        raise _unfit(f"{name} is of kind {given.kind!r}, expected one of {', '.join(KINDS)}")
    return replace(
        given,
        label=text(given.label, "a label"),
        names=names,
        couplings=array(given.couplings, np.float64, (n,), f"couplings of {name}"),
        eta=_reals(given.eta, f"eta of {name}"),
        theta=theta,
        right=array(given.right, np.complex128, (n, m), f"right eigenvectors of {name}"),
        left=array(given.left, np.complex128, (n, m), f"left eigenvectors of {name}"),
        theta_odd=array(given.theta_odd, np.complex128, (None,), f"theta_odd of {name}"),
        residual=float(given.residual),
        condition=float(given.condition),
        relevant=operator.index(given.relevant),
        marginal=operator.index(given.marginal),
        certified=None if given.certified is None else bool(given.certified),
        notes=_notes(given.notes),
        landmarks=_reals(given.landmarks, f"landmarks of {name}"),
        profile=None if given.profile is None else _profile(given.profile, f"profile of {name}"),
    )


def _profile(given: Profile, name: str) -> Profile:
    x = array(given.x, np.float64, (None,), f"x of the {name}")
    m = len(x)
    complex_valued = np.asarray(given.eigenfunctions).dtype.kind == "c"
    return replace(
        given,
        x_label=text(given.x_label, f"x_label of the {name}"),
        x=x,
        potential=array(given.potential, np.float64, (m,), f"potential of the {name}"),
        slope=array(given.slope, np.float64, (m,), f"slope of the {name}"),
        eigenfunctions=array(
            given.eigenfunctions,
            np.complex128 if complex_valued else np.float64,
            (None, m),
            f"eigenfunctions of the {name}",
        ),
    )


def track(given: Track) -> Track:
    """`Track` with owned arrays whose shapes agree."""
    name = f"track {given.label!r}"
    steps = array(given.steps, np.int64, (None,), f"steps of {name}")
    k = len(steps)
    return replace(
        given,
        label=text(given.label, "a label"),
        rule=text(given.rule, f"rule of {name}"),
        steps=steps,
        points=array(given.points, np.int64, (k,), f"points of {name}"),
        theta=array(given.theta, np.complex128, (k, None), f"theta of {name}"),
        distance=array(given.distance, np.float64, (k,), f"distance of {name}"),
        next_distance=array(given.next_distance, np.float64, (k,), f"next_distance of {name}"),
        notes=_notes(given.notes),
    )


def verdict(given: Verdict) -> Verdict:
    """`Verdict` with plain values and owned arrays."""
    if given.finite not in FINITE:
        raise _unfit(f"the verdict is {given.finite!r}, expected one of {', '.join(FINITE)}")
    return replace(
        given,
        counts=tuple(operator.index(c) for c in given.counts),
        settled_from=None if given.settled_from is None else operator.index(given.settled_from),
        relevant=None if given.relevant is None else operator.index(given.relevant),
        reasons=_notes(given.reasons),
        exponents=tuple(
            Extrapolation(value=complex(e.value), error=float(e.error), last=complex(e.last))
            for e in given.exponents
        ),
        growth=None if given.growth is None else _growth(given.growth),
    )


def _growth(given: Growth) -> Growth:
    canonical = array(given.canonical, np.float64, (None,), "canonical dimensions of the verdict")
    return Growth(
        canonical=canonical,
        entering=array(given.entering, np.float64, canonical.shape, "entering exponents of the verdict"),
        slope=float(given.slope),
        offset=float(given.offset),
        scatter=float(given.scatter),
    )


def status(word: str) -> str:
    """`word` if it is a status; StoreError otherwise."""
    if word not in STATUSES:
        raise _unfit(f"the status is {word!r}, expected one of {', '.join(STATUSES)}")
    return word


def _notes(given: Sequence[str]) -> tuple[str, ...]:
    return tuple(text(note, "a note") for note in given)


def _texts(given: Mapping[str, str], what: str) -> dict[str, str]:
    return {text(k, f"a name in {what}"): text(v, f"{what}.{k}") for k, v in given.items()}


def _reals(given: Mapping[str, float], what: str) -> dict[str, float]:
    return {text(k, f"a name in {what}"): float(v) for k, v in given.items()}


def _whole(given: Mapping[str, int], what: str) -> dict[str, int]:
    return {text(k, f"a name in {what}"): operator.index(v) for k, v in given.items()}


def _unfit(message: str) -> StoreError:
    return StoreError(
        f"cannot be stored: {message}", remedy="correct the record before handing it to the store"
    )
