"""Records into HDF5: the layout of a run file, written in one place.

Every dimension of every dataset has an attached dimension scale, so that each group opens as a table with
named axes. Only committed content is ever handed to this module; what a group or attribute means is told in
`runs/README.md`.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from frg.records import FixedPoint, Growth, Profile, Run, Step, Track, Verdict
from frg.store.canonical import to_json

if TYPE_CHECKING:
    import h5py

FORMAT = "frg run"
FORMAT_VERSION = 1

NUMBER = "dimensionless"
POWERS = "powers of k"


def write_run(file: h5py.File, run: Run) -> None:
    """The whole run into an empty file."""
    write_head(file, run)
    for index, step in enumerate(run.steps):
        write_step(file, index, step)
    write_results(file, run)


def write_head(file: h5py.File, run: Run) -> None:
    """Root attributes and the inputs."""
    _attributes(
        file,
        format=FORMAT,
        format_version=FORMAT_VERSION,
        title=run.inputs.title,
        created_utc=run.created_utc,
        command=run.command,
        frg_version=run.frg_version,
        packages=to_json(run.packages, "the packages"),
        signature=run.inputs.signature,
        conventions="t = ln k; theta = -eigenvalue of d beta_i/d g_j; relevant: Re theta > 0; "
        "couplings are dimensionless, in units of powers of k",
        status=run.status,
        step_count=len(run.steps),
    )
    truncation = file.create_group("truncation")
    _attributes(
        truncation,
        text=run.inputs.truncation_text,
        parameters=to_json(run.inputs.parameters, "the parameters"),
        equations=run.inputs.equations,
        latex=run.inputs.latex,
    )
    regulator = file.create_group("regulator")
    _attributes(
        regulator,
        name=run.inputs.regulator,
        parameters=to_json(run.inputs.regulator_parameters, "the regulator parameters"),
    )
    _attributes(file.create_group("settings"), values=to_json(run.inputs.settings, "the settings"))
    file.create_group("steps")


def write_step(file: h5py.File, index: int, step: Step) -> None:
    """One step; its attribute `committed` is written last."""
    group = file["steps"].create_group(f"{index:04d}")
    _attributes(
        group,
        order=to_json(step.order, "the order"),
        outcome=step.outcome.word,
        search=to_json(step.search, "the search counts"),
        seconds=step.seconds,
        notes=to_json(step.notes, "the notes"),
    )
    points = group.create_group("fixed_points")
    for number, point in enumerate(step.fixed_points):
        _write_point(points.create_group(str(number)), point)
    file.attrs["step_count"] = index + 1
    group.attrs["committed"] = 1


def write_results(file: h5py.File, run: Run) -> None:
    """Tracks, verdict and status, in place of earlier ones."""
    for name in ("tracks", "verdict"):
        if name in file:
            del file[name]
    tracks = file.create_group("tracks")
    for number, track in enumerate(run.tracks):
        _write_track(tracks.create_group(str(number)), track)
    if run.verdict is not None:
        _write_verdict(file.create_group("verdict"), run.verdict)
    file.attrs["status"] = run.status


def _write_point(group: h5py.Group, point: FixedPoint) -> None:
    table = _Table(group)
    table.axis("coupling", point.names, "names of the couplings")
    table.axis("direction", np.arange(len(point.theta)), "eigendirections by falling Re theta")
    table.axis("odd_direction", np.arange(len(point.theta_odd)), "directions odd in the field")
    table.axis("field", tuple(point.eta), "fields that have an anomalous dimension")
    table.put("couplings", point.couplings, ("coupling",), "fixed-point values, in units of k", POWERS)
    table.put("theta", point.theta, ("direction",), "critical exponents, minus the stability eigenvalues")
    table.put("right", point.right, ("coupling", "direction"), "right eigenvectors as columns", POWERS)
    table.put(
        "left",
        point.left,
        ("coupling", "direction"),
        "left eigenvectors as columns, left^H right = 1",
        POWERS,
    )
    table.put("theta_odd", point.theta_odd, ("odd_direction",), "exponents of perturbations odd in the field")
    table.put("eta", np.array(list(point.eta.values()), dtype=np.float64), ("field",), "anomalous dimensions")
    _attributes(
        group,
        label=point.label,
        kind=point.kind,
        residual=point.residual,
        condition=point.condition,
        relevant=point.relevant,
        marginal=point.marginal,
        notes=to_json(point.notes, "the notes"),
        landmarks=to_json(point.landmarks, "the landmarks"),
    )
    if point.certified is not None:
        group.attrs["certified"] = int(point.certified)
    if point.profile is not None:
        _write_profile(group.create_group("profile"), point.profile)


def _write_profile(group: h5py.Group, profile: Profile) -> None:
    table = _Table(group)
    table.axis("x", profile.x, f"the coordinate {profile.x_label}", POWERS)
    table.axis("direction", np.arange(len(profile.eigenfunctions)), "eigendirections by falling Re theta")
    table.put("potential", profile.potential, ("x",), "fixed-point function", POWERS)
    table.put("slope", profile.slope, ("x",), "its first derivative", POWERS)
    table.put(
        "eigenfunctions",
        profile.eigenfunctions,
        ("direction", "x"),
        "scaled to a largest absolute value of 1",
    )
    group.attrs["x_label"] = profile.x_label


def _write_track(group: h5py.Group, track: Track) -> None:
    table = _Table(group)
    table.axis("step", track.steps, "indices of the steps")
    table.axis("direction", np.arange(track.theta.shape[1]), "followed directions")
    table.put("point", track.points, ("step",), "index of the fixed point within its step")
    table.put(
        "theta", track.theta, ("step", "direction"), "exponents of followed directions, NaN where none is"
    )
    table.put("distance", track.distance, ("step",), "distance from the chosen root to the prediction")
    table.put("next_distance", track.next_distance, ("step",), "the same for the next-nearest root")
    _attributes(group, label=track.label, rule=track.rule, notes=to_json(track.notes, "the notes"))


def _write_verdict(group: h5py.Group, verdict: Verdict) -> None:
    table = _Table(group)
    table.axis("step", np.arange(len(verdict.counts)), "indices of the steps")
    table.axis("exponent", np.arange(len(verdict.exponents)), "followed exponents")
    counts = np.array(verdict.counts, dtype=np.int64)
    table.put(
        "counts", counts, ("step",), "relevant directions of the tracked fixed point, -1 where not found"
    )
    for name, dtype, text in (
        ("value", np.complex128, "exponent carried to infinite order"),
        ("error", np.float64, "absolute error of it, estimated from the accelerated sequence"),
        ("last", np.complex128, "last value of the raw sequence"),
    ):
        column = np.array([getattr(e, name) for e in verdict.exponents], dtype=dtype)
        table.put(f"exponent_{name}", column, ("exponent",), text)
    _attributes(group, finite=verdict.finite, reasons=to_json(verdict.reasons, "the reasons"))
    for name, number in (("settled_from", verdict.settled_from), ("relevant", verdict.relevant)):
        if number is not None:
            group.attrs[name] = number
    if verdict.growth is not None:
        _write_growth(group.create_group("growth"), verdict.growth)


def _write_growth(group: h5py.Group, growth: Growth) -> None:
    table = _Table(group)
    table.axis("entry", np.arange(len(growth.canonical)), "newly entering operators")
    table.put("canonical", growth.canonical, ("entry",), "canonical dimensions of the operators")
    table.put("entering", growth.entering, ("entry",), "exponents that enter with them")
    _attributes(group, slope=growth.slope, offset=growth.offset, scatter=growth.scatter)


class _Table:
    """A group whose datasets share named axes; an axis is a dimension scale that is attached wherever it is
    used."""

    def __init__(self, group: h5py.Group):
        self._group = group
        self._axes: dict[str, h5py.Dataset] = {}

    def axis(
        self, name: str, values: np.ndarray | Sequence[str], description: str, units: str = NUMBER
    ) -> None:
        scale = self._dataset(name, values, description, units)
        scale.make_scale(name)
        self._axes[name] = scale

    def put(
        self, name: str, values: np.ndarray, axes: tuple[str, ...], description: str, units: str = NUMBER
    ) -> None:
        dataset = self._dataset(name, values, description, units)
        for dimension, axis in enumerate(axes):
            dataset.dims[dimension].attach_scale(self._axes[axis])

    def _dataset(
        self, name: str, values: np.ndarray | Sequence[str], description: str, units: str
    ) -> h5py.Dataset:
        import h5py

        if isinstance(values, np.ndarray):
            dataset = self._group.create_dataset(name, data=values)
        else:
            texts = np.array(values, dtype=object) if values else np.empty(0, dtype=object)
            dataset = self._group.create_dataset(name, data=texts, dtype=h5py.string_dtype("utf-8"))
        _attributes(dataset, units=units, description=description)
        return dataset


def _attributes(target: h5py.Group | h5py.Dataset, **values: str | float) -> None:
    for name, value in values.items():
        target.attrs[name] = value
