"""With --json a command prints one JSON object on standard output and nothing else."""

from __future__ import annotations

import json
import math
from pathlib import Path

import pytest

from tests.cli.contract import check_run_object


def one_object(shell) -> dict:
    """The printed object; fails if anything else is on standard output, or a number JSON does not know."""
    def refuse(text: str) -> None:
        raise AssertionError(f"{text} is no JSON number")

    assert shell.out.count("\n") == 1 and shell.out.endswith("}\n")
    found: dict = json.loads(shell.out, parse_constant=refuse)
    assert shell.err == ""
    return found


def test_solve(shell, shelf: Path) -> None:
    arguments = ("solve", shelf / "ising_lpa_zero.toml", "--order", "5", "--json", "--no-save")
    assert shell(*arguments) == 0
    found = one_object(shell)
    check_run_object(found, "solve")
    assert found["run"] is None and found["tracks"] == [] and found["verdict"] is None
    (step,) = found["steps"]
    assert step["order"] == {"n": 5}
    gaussian = step["fixed_points"][0]
    # exact: at u = 0 the exponents are d - n (d - 2), n = 1, 2, ..., 5
    assert gaussian["gaussian"] and [t[0] for t in gaussian["theta"]] == pytest.approx([2, 1, 0, -1, -2], abs=1e-12)
    assert (gaussian["relevant"], gaussian["marginal"]) == (2, 1)


def test_overrides_and_regulators_are_in_the_object_and_in_the_signature(shell, shelf: Path) -> None:
    arguments = ("solve", shelf / "ising_lpa.toml", "--order", "2", "--json", "--no-save")
    signatures = set()
    for more, parameters, regulator in (
        ((), {"d": 3}, {"name": "flat", "parameters": {"alpha": 1.0}}),
        (("--set", "d=11/4"), {"d": 2.75}, {"name": "flat", "parameters": {"alpha": 1.0}}),
        (("--regulator", "exponential:alpha=2"), {"d": 3},
         {"name": "exponential", "parameters": {"alpha": 2.0, "s": 1.0}}),
        (("--regulator", "custom:a*exp(-y),a=2"), {"d": 3}, {"name": "custom:a*exp(-y)", "parameters": {"a": 2.0}}),
    ):
        assert shell(*arguments, *more) == 0
        found = one_object(shell)
        check_run_object(found, "solve")
        assert found["parameters"] == parameters and found["regulator"] == regulator
        signatures.add(found["signature"])
    assert len(signatures) == 4


def test_a_parameter_is_read_exactly(shell, shelf: Path) -> None:
    # exact at n = 2, with D = 1/(1 - (4 - d)/(3 (d - 2))): kappa = 3/((d - 2) D^2) in loop units v_d 4/d
    assert shell("solve", shelf / "ising_lpa.toml", "--order", "2", "--json", "--no-save", "--set", "d=11/4") == 0
    point = one_object(shell)["steps"][0]["fixed_points"][0]
    d = 2.75
    loop = 4 / d / (2 ** (d + 1) * math.pi ** (d / 2) * math.gamma(d / 2))
    mass = 1 / (1 - (4 - d) / (3 * (d - 2)))
    assert point["couplings"]["U_min"] == pytest.approx(loop * 3 / ((d - 2) * mass**2), rel=1e-12)
    assert point["couplings"]["U2"] == pytest.approx((4 - d) * mass**3 / (18 * loop), rel=1e-12)


def test_converge_and_show_print_the_same_object(shell, shelf: Path) -> None:
    assert shell("converge", shelf / "ising_lpa.toml", "--orders", "2..5", "--json") == 0
    found = one_object(shell)
    check_run_object(found, "converge")
    assert found["run"].startswith("runs/") and found["verdict"]["counts"] == [1, 1, 1, 1]
    assert shell("show", found["run"], "--json") == 0
    again = one_object(shell)
    check_run_object(again, "converge")
    assert {k: v for k, v in again.items() if k != "run"} == {k: v for k, v in found.items() if k != "run"}
    assert Path(again["run"]).samefile(found["run"])
    assert shell("check", found["run"], "--json") == 0
    checked = one_object(shell)
    assert checked["sound"] is True and {tuple(c) for c in checked["checks"]} == {("name", "passed", "detail")}
    assert shell("report", found["run"], "--json") == 0
    (page,) = one_object(shell)["wrote"]
    assert Path(page).is_file() and page.endswith(".html")
    assert shell("runs", "--json") == 0
    (row,) = one_object(shell)["runs"]
    assert (row["status"], row["steps"], row["signature"]) == ("complete", 4, found["signature"])


def test_the_orders_of_the_file_are_the_default(shell, shelf: Path, tmp_path: Path) -> None:
    text = (shelf / "ising_lpa.toml").read_text().replace("2..12", "2,4")
    (tmp_path / "short.toml").write_text(text)
    assert shell("converge", "short.toml", "--json", "--no-save") == 0
    assert [s["order"] for s in one_object(shell)["steps"]] == [{"n": 2}, {"n": 4}]
    assert shell("solve", "short.toml", "--json", "--no-save") == 0
    assert [s["order"] for s in one_object(shell)["steps"]] == [{"n": 4}]


def test_equations_runs_and_truncations(shell, shelf: Path) -> None:
    assert shell("equations", shelf / "on_lpa_prime.toml", "--json") == 0
    found = one_object(shell)
    assert set(found) == {"frg", "command", "run", "signature", "parameters", "regulator", "equations", "latex", "notes"}
    assert len(found["equations"]) == len(found["latex"]) == 2 and found["equations"][1].startswith("eta_Z = ")
    assert shell("runs", "--json") == 0 and one_object(shell)["runs"] == []
    assert shell("truncations", "--json") == 0
    listed = one_object(shell)["truncations"]
    assert all(set(row) == {"file", "path", "title", "about"} and all(row.values()) for row in listed)


def test_nothing_found_is_an_object_too(shell, shelf: Path) -> None:
    # at n = 2 the mass at the minimum is 1 + 2 kappa lambda = 1/(1 - (4 - d)/(3 (d - 2))), infinite in d = 5/2
    for command, choice in (("solve", "--order"), ("converge", "--orders")):
        assert shell(command, shelf / "ising_lpa.toml", choice, "2", "--set", "d=5/2", "--json") == 1
        found = one_object(shell)
        check_run_object(found, command)
        assert found["steps"][0]["outcome"] == "none found" and found["status"] == "failed"
        assert shell("check", found["run"]) == 0  # an honest record of a failure is sound
