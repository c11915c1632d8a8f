"""Every command in process: what it prints, the JSON contract, exit codes."""

from __future__ import annotations

from pathlib import Path

import h5py
import numpy as np
import pytest

from frg.store.hdf5 import read_run

POINT_KEYS = {"label", "gaussian", "couplings", "eta", "residual", "theta", "relevant", "marginal", "certified", "condition",
              "notes"}


def test_help_teaches(shell, capsys) -> None:
    with pytest.raises(SystemExit) as done:
        shell("--help")
    assert done.value.code == 0
    text = capsys.readouterr().out
    assert "theta = -(eigenvalue" in text and "exit codes" in text
    assert shell() == 2


def test_equations(shell, shelf: Path) -> None:
    assert shell("equations", shelf / "on_lpa.toml") == 0
    assert "d_t U(rho) = -U*d + U'*rho*(d - 2)" in shell.out and "regulator: flat" in shell.out
    assert shell("equations", shelf / "on_lpa.toml", "--latex", "--regulator", "exponential") == 0
    assert r"\partial_t U(\rho)" in shell.out
    assert shell("equations", shelf / "on_lpa.toml", "--json") == 0
    assert {"frg", "command", "equations", "latex", "signature"} <= set(shell.json())


def test_converge_prints_one_json_object_with_the_contract(shell, shelf: Path) -> None:
    assert shell("converge", shelf / "ising_lpa.toml", "--orders", "2..8", "--json") == 0
    found = shell.json()
    assert found["command"] == "converge" and found["parameters"] == {"d": 3}
    assert found["regulator"] == {"name": "flat", "parameters": {"alpha": 1.0}}
    assert [s["order"] for s in found["steps"]] == [{"n": n} for n in range(2, 9)]
    for step in found["steps"]:
        assert step["outcome"] == "found"
        for point in step["fixed_points"]:
            assert set(point) >= POINT_KEYS
            real = [t[0] for t in point["theta"]]
            assert real == pytest.approx(sorted(real, reverse=True), abs=1e-8)
    first = found["steps"][0]["fixed_points"][0]
    # exact for n = 2: kappa = 4/3 in loop units, nu = 1/2, omega = 1/3
    assert first["couplings"]["U_min"] * 6 * np.pi**2 == pytest.approx(4 / 3, abs=1e-12)
    assert first["theta"][0][0] == pytest.approx(2, abs=1e-12)
    assert first["theta"][1][0] == pytest.approx(-1 / 3, abs=1e-12)
    # computed independently; pattern of the orders as in D. Litim, Nucl. Phys. B 631 (2002) 128
    for index, nu, omega in ((2, 0.6505737945092, 0.59886386305), (4, 0.6498469964463, 0.66119350454)):
        track = found["tracks"][0]
        point = found["steps"][index]["fixed_points"][track["points"][track["steps"].index(index)]]
        assert 1 / point["theta"][0][0] == pytest.approx(nu, abs=1e-12)
        assert -point["theta"][1][0] == pytest.approx(omega, abs=1e-10)
    verdict = found["verdict"]
    assert (verdict["relevant"], verdict["settled_from"], verdict["finite"]) == (1, 2, "supported")
    assert {"value", "error"} <= set(verdict["exponents"][0])
    stored = read_run(found["run"])
    assert stored.status == "complete" and len(stored.steps) == 7
    assert shell("show", found["run"], "--json") == 0
    again = shell.json()
    assert again["steps"] == found["steps"] and again["verdict"] == found["verdict"]


def test_solve_keeps_or_does_not_keep(shell, shelf: Path, tmp_path: Path) -> None:
    assert shell("solve", shelf / "one_coupling.toml", "--json", "--no-save") == 0
    found = shell.json()
    assert found["run"] is None and not (tmp_path / "runs").exists()
    values = [p["couplings"]["g"] for p in found["steps"][0]["fixed_points"]]
    assert values == pytest.approx([0, 2 / 3])
    assert shell("solve", shelf / "one_coupling.toml", "--set", "A=1", "--save", "here/kept.h5", "--quiet") == 0
    assert shell.out == "" and read_run(tmp_path / "here" / "kept.h5").status == "complete"
    assert shell("solve", shelf / "one_coupling.toml", "--save", "folder") == 0
    assert "theta      2   (nu = 0.5)" in shell.out and len(list((tmp_path / "folder").glob("*.h5"))) == 1


def test_solve_sets_spurious_roots_aside_unless_all_are_asked_for(shell, shelf: Path) -> None:
    arguments = ("solve", shelf / "ising_lpa.toml", "--order", "4", "--json", "--no-save")
    assert shell(*arguments) == 0
    kinds = [p["kind"] for p in shell.json()["steps"][0]["fixed_points"]]
    assert "spurious" not in kinds
    assert shell(*arguments, "--all") == 0
    more = [p["kind"] for p in shell.json()["steps"][0]["fixed_points"]]
    assert len(more) > len(kinds) and "spurious" in more


def test_nothing_found_is_exit_code_one(shell, tmp_path: Path) -> None:
    (tmp_path / "rootless.toml").write_text(
        'title = "no fixed point"\n[space]\ndimension = 4\n[running]\ng = { kind = "coupling" }\n[flow]\ng = "1 + g^2"\n'
    )
    assert shell("solve", "rootless.toml", "--json", "--no-save") == 1
    assert shell.json()["steps"][0]["outcome"] == "none found"


def test_runs_show_report_and_truncations(shell, shelf: Path, tmp_path: Path) -> None:
    assert shell("runs") == 0 and "no runs" in shell.out
    assert shell("converge", shelf / "ising_lpa.toml", "--orders", "2..4") == 0
    assert "d_t U(rho)" in shell.out and "settled from order 2" in shell.out and "wrote runs/" in shell.out
    (page,) = (tmp_path / "runs").glob("*.html")
    assert "<svg" in page.read_text() and list((tmp_path / "runs").glob("*.svg"))
    assert shell("runs") == 0 and "complete" in shell.out
    assert shell("runs", "--json") == 0 and shell.json()["runs"][0]["steps"] == 3
    (run,) = (tmp_path / "runs").glob("*.h5")
    assert shell("show", run.name[:12]) == 0 and "0.6505737945" in shell.out
    assert shell("show", run, "--step", "0") == 0 and "U_min" in shell.out
    assert shell("show", run, "--latex") == 0 and shell.out.count("{") == shell.out.count("}")
    assert shell("show", run, "--csv") == 0 and "theta_1" in shell.out
    assert shell("show", run, "--step", "7") == 2
    assert shell("report", run, "--output", "page.html", "--plots", "pictures") == 0
    assert (tmp_path / "page.html").stat().st_size > 20_000
    assert {p.suffix for p in (tmp_path / "pictures").iterdir()} == {".svg", ".pdf"}
    assert shell("truncations") == 0 and "ising_lpa.toml" in shell.out
    assert shell("truncations", "--json") == 0 and len(shell.json()["truncations"]) >= 13
    assert shell("equations", "ising_lpa") == 0  # by name, from the shelf


def change_couplings(point: h5py.Group) -> None:
    values = point["couplings"][()]
    values[0] *= 1.001
    point["couplings"][...] = values


def change_leading_exponent(point: h5py.Group) -> None:
    values = point["theta"][()]
    values[0] *= 1.0001
    point["theta"][...] = values


def change_correction_exponent(point: h5py.Group) -> None:
    values = point["theta"][()]
    values[1] *= 1.5
    point["theta"][...] = values


def change_count(point: h5py.Group) -> None:
    point.attrs["relevant"] = int(point.attrs["relevant"]) + 1


def change_residual(point: h5py.Group) -> None:
    point.attrs["residual"] = 1e-3


@pytest.fixture(scope="module")
def sound(shelf: Path, tmp_path_factory) -> Path:
    path = tmp_path_factory.mktemp("sound") / "sound.h5"
    from frg.cli.main import main

    assert main(["converge", str(shelf / "ising_lpa.toml"), "--orders", "2..4", "--save", str(path), "--quiet"]) == 0
    return path


def test_a_sound_run_passes_its_check(shell, sound: Path) -> None:
    assert shell("check", sound) == 0
    assert "FAILED" not in shell.out and shell.out.endswith("sound.h5: sound\n")
    assert "exponents recomputed at" in shell.out


@pytest.mark.parametrize(
    "change", [change_couplings, change_leading_exponent, change_correction_exponent, change_count, change_residual]
)
def test_check_names_the_fixed_point_that_was_changed(shell, sound: Path, tmp_path: Path, change) -> None:
    copy = tmp_path / "changed.h5"
    copy.write_bytes(sound.read_bytes())
    with h5py.File(copy, "r+") as file:
        change(file["steps/0001/fixed_points/0"])
    assert shell("check", copy) == 1
    failed = [line for line in shell.out.splitlines() if line.startswith("FAILED")]
    label = read_run(sound).steps[1].fixed_points[0].label
    assert any(f"step 1, {label}" in line or f"step 1, fixed point {label}" in line for line in failed), shell.out
    assert "NOT sound" in shell.out


@pytest.mark.parametrize(
    "arguments, words",
    [
        (["solve", "missing.toml"], "missing.toml"),
        (["solve", "."], "."),
        (["solve", "{shelf}/ising_lpa.toml", "--regulator", "expnential"], "exponential"),
        (["solve", "{shelf}/ising_lpa.toml", "--regulator", "flat:beta=2"], "beta"),
        (["solve", "{shelf}/ising_lpa.toml", "--regulator", "custom:-exp(-y)"], "positive"),
        (["solve", "{shelf}/ising_lpa.toml", "--set", "d"], "NAME=VALUE"),
        (["solve", "{shelf}/ising_lpa.toml", "--set", "q=3"], "q"),
        (["solve", "{shelf}/ising_lpa.toml", "--set", "d=nan"], "nan"),
        (["solve", "{shelf}/ising_lpa.toml", "--order", "1"], "no coupling"),
        (["solve", "{shelf}/ising_lpa_grid.toml", "--order", "3"], "--order"),
        (["solve", "{shelf}/ising_lpa_prime.toml", "--regulator", "sharp"], "sharp"),
        (["solve", "{shelf}/ising_lpa.toml", "--set", "d=4", "--regulator", "mass"], "diverges"),
        (["solve", "{shelf}/ising_lpa.toml", "--order", "-3"], "no coupling"),
        (["solve", "{shelf}/ising_lpa.toml", "--order", "171"], "170"),
        (["solve", "{shelf}/ising_lpa.toml", "--set", "d=1/0"], "division by zero"),
        (["solve", "{shelf}/ising_lpa.toml", "--set", "d=9^9^9^9"], "exponent"),
        (["solve", "{shelf}/ising_lpa.toml", "--set", "d=-1"], "dimension"),
        (["solve", "{shelf}/ising_lpa.toml", "--set", "d="], "NAME=VALUE"),
        (["solve", "{shelf}/ising_lpa.toml", "--regulator", "custom:__import__('os')"], "--regulator"),
        (["equations", "{tmp}/broken.toml"], "broken.toml:3"),
        (["equations", "{tmp}/latin.toml"], "latin.toml"),
        (["equations", "{tmp}/empty.toml"], "empty.toml"),
        (["equations", "{tmp}/huge.toml"], "huge.toml"),
        (["converge", "{shelf}/ising_lpa.toml", "--orders", "2..x"], "orders"),
        (["converge", "{shelf}/ising_lpa.toml", "--orders", "5..2"], "2..5"),
        (["converge", "{shelf}/ising_lpa.toml", "--orders", "2..1000000"], "--orders"),
        (["converge", "{shelf}/ising_lpa.toml", "--orders", "2..8:0"], "step"),
        (["converge", "{shelf}/ising_lpa.toml", "--orders", "1..3"], "no coupling"),
        (["converge", "{shelf}/ising_lpa.toml", "--orders", "2..171"], "170"),
        (["converge", "{shelf}/ising_lpa.toml", "--resume", "{file}"], "not an HDF5 file"),
        (["show", "{file}"], "not an HDF5 file"),
        (["show", "."], "no run"),
        (["runs", "--folder", "{file}"], "file"),
        (["converge", "{shelf}/ising_lpa_grid.toml"], "order"),
        (["converge", "{shelf}/ising_lpa.toml", "--resume", "nowhere"], "nowhere"),
        (["show", "nothing"], "nothing"),
        (["check", "nothing.h5"], "nothing"),
        (["report", "nothing"], "nothing"),
        (["solve", "{shelf}/one_coupling.toml", "--save", "{file}/x.h5"], "file"),
    ],
)
def test_bad_input_is_one_message_and_exit_code_two(shell, shelf: Path, tmp_path: Path, arguments, words: str) -> None:
    (tmp_path / "file").write_text("not a folder")
    (tmp_path / "broken.toml").write_text('title = "cut off"\n[space]\ndimension = \n')
    (tmp_path / "latin.toml").write_bytes('title = "Flussgleichung f\xfcr rho"\n'.encode("latin-1"))
    (tmp_path / "empty.toml").write_text("")
    with open(tmp_path / "huge.toml", "wb") as file:
        file.truncate(2**30)
    filled = [a.format(shelf=shelf, file=tmp_path / "file", tmp=tmp_path) for a in arguments]
    assert shell(*filled, *([] if arguments[0] != "solve" or "--save" in arguments else ["--no-save"])) == 2
    assert shell.out == ""
    assert words in shell.err and "Traceback" not in shell.err
    assert shell.err.startswith("frg: ") and shell.err.count("frg: ") == shell.err.count("remedy: ") == 1
    assert not (tmp_path / "runs").exists()


@pytest.mark.parametrize(
    "arguments",
    [
        ["converge", "x.toml", "--order", "4"],  # no abbreviation of --orders
        ["converge", "x.toml", "--resume", "r", "--no-save"],
        ["converge", "x.toml", "--resume", "r", "--save", "s.h5"],
        ["solve", "x.toml", "--save", "s.h5", "--no-save"],
        ["solve", "x.toml", "--order", "four"],
        ["show", "r", "--json", "--latex"],
        ["solve"],
        ["no-such-command"],
    ],
)
def test_arguments_that_make_no_sense_are_exit_code_two(shell, capsys, arguments: list[str]) -> None:
    with pytest.raises(SystemExit) as done:
        shell(*arguments)
    assert done.value.code == 2
    out, err = capsys.readouterr()
    assert out == "" and "error:" in err and "Traceback" not in err
