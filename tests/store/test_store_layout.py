"""The layout of a run file as other programs see it."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import h5py
import numpy as np
import xarray

from frg.store.hdf5 import read_run


def groups(file: h5py.File) -> list[str]:
    found = ["/"]
    file.visititems(lambda name, item: found.append(name) if isinstance(item, h5py.Group) else None)
    return found


def test_every_group_opens_as_a_table_with_named_axes(run_file: Path) -> None:
    with h5py.File(run_file) as file:
        names = groups(file)
    assert len(names) > 20
    for name in names:
        with xarray.open_dataset(run_file, engine="h5netcdf", group=name) as table:
            table.load()
            assert not [axis for axis in table.sizes if str(axis).startswith("phony")]
            for column in table.variables.values():
                assert column.attrs["units"] in ("dimensionless", "powers of k")
                assert column.attrs["description"]
    with xarray.open_dataset(run_file, engine="h5netcdf", group="steps/0001/fixed_points/1") as table:
        assert list(table.coupling.values) == ["U1", "U2", "U3"]
        assert table.couplings.sel(coupling="U2") == 1 / 3
        assert table.right.dims == table.left.dims == ("coupling", "direction")
        assert table.theta.dtype == np.complex128
        assert float(table.eta.sel(field="phi")) == 0.03
    with xarray.open_dataset(run_file, engine="h5netcdf", group="tracks/0") as table:
        assert table.theta.dims == ("step", "direction")


def test_a_run_without_a_fixed_point_or_coupling_opens_too(tmp_path: Path, samples) -> None:
    point = samples.point("A", "gaussian", np.zeros(0))
    from dataclasses import replace

    with samples.create(tmp_path / "run.h5") as store:
        store.append_step(replace(samples.step(2), fixed_points=()))
        store.append_step(replace(samples.step(2), fixed_points=(replace(point, eta={}),)))
    with h5py.File(tmp_path / "run.h5") as file:
        names = groups(file)
    for name in names:
        with xarray.open_dataset(tmp_path / "run.h5", engine="h5netcdf", group=name) as table:
            table.load()


def test_the_promised_names_are_there(run_file: Path) -> None:
    with h5py.File(run_file) as file:
        root = dict(file.attrs)
        assert root["format"] == "frg run"
        assert root["format_version"] == 1
        assert {"created_utc", "command", "frg_version", "signature"} <= set(root)
        assert json.loads(root["packages"]) == {"numpy": "2.4"}
        assert root["status"] == "complete"
        assert file["truncation"].attrs["text"] == read_run(run_file).inputs.truncation_text
        assert json.loads(file["truncation"].attrs["parameters"]) == {"d": "3"}
        assert {"equations", "latex"} <= set(file["truncation"].attrs)
        assert file["regulator"].attrs["name"] == "exponential"
        assert json.loads(file["regulator"].attrs["parameters"]) == {"alpha": 1.0}
        step = file["steps/0000"]
        assert json.loads(step.attrs["order"]) == {"n": 2}
        assert step.attrs["outcome"] == "found"
        assert step.attrs["committed"] == 1
        point = step["fixed_points/0"]
        assert set(point) >= {"couplings", "coupling", "theta", "right", "left"}
        assert point["couplings"].dims[0][0].name == point["coupling"].name
        assert point["couplings"].dtype == np.float64 and point["theta"].dtype == np.complex128
        assert set(point.attrs) >= {"label", "residual", "relevant", "marginal", "certified", "condition"}
        assert "tracks" in file and "verdict" in file


def test_long_texts_are_kept(tmp_path: Path, samples) -> None:
    """Longer than the 64 KiB that an attribute itself may hold."""
    text = "θ = ν⁻¹\n" * 50_000
    samples.create(tmp_path / "run.h5", equations=text).close()
    assert read_run(tmp_path / "run.h5").inputs.equations == text


def test_the_seal_is_beyond_what_hdf5_reads(run_file: Path) -> None:
    data = run_file.read_bytes()
    assert data[-81:-65] == b"\nfrg run sha256 "
    assert data[-65:-1].decode() == hashlib.sha256(data[:-81]).hexdigest()
