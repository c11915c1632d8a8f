"""A Lagrangian that is no scalar, lacks a kinetic term, or leaves a running quantity unused is refused."""

import dataclasses
from pathlib import Path

import pytest
import sympy

from frg.errors import InputError
from frg.language.action import check_action
from frg.language.reader import read_truncation_text

DATA = Path(__file__).parent / "data"


def model(lagrangian, *, components='"N"', extra=""):
    text = (DATA / "on_model.toml").read_text(encoding="utf-8")
    text = text.replace('components = "N"', f"components = {components}")
    text = text.replace("[definitions]", f"{extra}\n[definitions]")
    return text.replace('"Z/2*d(phi,mu)^2 + U(rho)"', f'"{lagrangian}"')


@pytest.mark.parametrize(
    "lagrangian",
    [
        "U(rho) + d(phi,mu)*d(phi,mu)*Z/2",
        "Z*(d(phi,nu)^2/2) + U(rho)",
        "(Z*d(phi,sigma)^2 + 2*U(rho))/2",
        "Z/4*(d(phi,mu)^2 + d(phi,mu)^2) + U(rho) + phi^4*(1 + rho)^2",
        "Z/2*d(phi,mu)^2 + U(rho) + (phi^2)^3/N",
    ],
)
def test_equivalent_forms_are_accepted(lagrangian):
    assert read_truncation_text(model(lagrangian), source="f").lagrangian is not None


@pytest.mark.parametrize(
    ("lagrangian", "words", "fragment"),
    [
        ("Z/2*d(phi,mu) + U(rho)", "Lorentz index mu is free", None),
        ("Z/2*d(phi,mu)*d(phi,nu) + U(rho)", "index mu is free", None),
        ("Z/2*d(phi,mu)^2 + U(rho) + d(phi,mu)", "index mu is free", None),
        ("Z/2*d(phi,mu)^3 + U(rho)", "mu occurs 3 times", None),
        ("Z/2*d(phi,mu)^2 + U(rho) + d(phi,mu)^2*d(phi,mu)*d(phi,nu)", "mu occurs 3 times", None),
        ("Z/2*d(phi,mu)^2 + U(rho) + phi", "components of phi are not contracted", "phi"),
        ("Z/2*d(phi,mu)^2 + U(rho) + phi^3", "components of phi are not contracted", None),
        ("Z/2*d(phi,mu)^2 + U(rho) + rho*phi", "components of phi are not contracted", None),
        ("Z/2*d(phi,mu)^2 + U(rho) + sin(phi)", "components of phi are not contracted", None),
        ("Z*d(phi,mu)^2 + U(rho)", "not canonically normalised", None),
        ("-Z/2*d(phi,mu)^2 + U(rho)", "not canonically normalised", None),
        ("N*Z/2*d(phi,mu)^2 + U(rho)", "not canonically normalised", None),
        ("Z/2*d(phi,mu)^2 + d(phi,mu)^2/2 + U(rho)", "not canonically normalised", None),
        ("Z/2*d(phi,mu)^2 + d(phi,nu)^2/2 + U(rho)", "two kinetic terms", None),
        ("Z*U(rho)", "no kinetic term", None),
        ("exp(d(phi,mu)^2) + U(rho) + Z", "not a polynomial in derivatives", None),
        ("U(rho)/d(phi,mu)^2 + Z", "not a polynomial in derivatives", None),
        ("(1+d(phi,mu)^2)^1000 + U(rho) + Z", "not a polynomial in derivatives", None),
        ("((1+d(phi,mu)+d(phi,nu)+d(phi,sigma))^8)^2*U(rho)*Z", "not a polynomial", None),
        ("(1+d(phi,mu)+d(phi,nu)+d(phi,sigma))^8*U(rho)*Z", "too many derivative terms", None),
        ("Z/2*d(phi,mu)^2 + U(phi^2/2)", "does not match [running]", None),
        ("Z/2*d(phi,mu)^2 + U(2*rho)", "does not match [running]", "U(2*rho)"),
        ("Z/2*d(phi,mu)^2 + rho", "U is declared in [running] and never used", None),
        ("d(phi,mu)^2/2 + U(rho)", "Z is declared in [running] and never used", None),
        ("Z/2*d(phi,mu)^2 + U(rho) + Z*rho", "outside the kinetic term", "Z"),
    ],
)
def test_refused(lagrangian, words, fragment):
    text = model(lagrangian)
    with pytest.raises(InputError) as caught:
        read_truncation_text(text, source="model.toml")
    error = caught.value
    assert words in error.message
    line = next(i for i, row in enumerate(text.split("\n"), 1) if row.startswith("lagrangian"))
    assert error.place.source == "model.toml"
    assert error.place.line == line
    assert error.place.column >= len('lagrangian = "') + 1
    if fragment:
        assert error.place.text == fragment


def test_the_column_of_an_offending_term():
    text = model("Z/2*d(phi,mu)^2 + U(rho) + d(phi, nu)")
    with pytest.raises(InputError) as caught:
        read_truncation_text(text, source="model.toml")
    row = text.split("\n")[caught.value.place.line - 1]
    assert row[caught.value.place.column - 1 :].startswith("d(phi, nu)")


def test_one_real_scalar_may_have_odd_powers():
    assert read_truncation_text(model("Z/2*d(phi,mu)^2 + U(rho) + phi + phi^3", components="1"), source="f")


def test_several_fields():
    both = "Z/2*d(phi,mu)^2 + d(chi,mu)^2/2 + U(rho) + chi*phi^2"
    assert read_truncation_text(model(both, extra='chi = "scalar"'), source="f")
    for lagrangian, words in [
        ("Z/2*d(phi,mu)^2 + U(rho)", "field chi has no kinetic term"),
        ("Z/2*d(phi,mu)^2 + U(rho) + d(chi,mu)^2", "not canonically normalised"),
        ("Z/2*d(phi,mu)^2 + U(rho) + d(chi,mu)^2/2 + chi*phi", "components of phi"),
        ("Z/2*d(phi,mu)^2 + U(rho) + d(chi,mu)*d(phi,mu)", "mixes chi and phi"),
    ]:
        with pytest.raises(InputError, match=words.replace("(", r"\(")):
            read_truncation_text(model(lagrangian, extra='chi = "scalar"'), source="f")


def test_a_coordinate_must_depend_on_a_field():
    text = model("Z/2*d(phi,mu)^2 + U(rho)").replace('rho = "phi^2/2"', 'rho = "N/2"')
    with pytest.raises(InputError, match="does not depend on any field"):
        read_truncation_text(text, source="f")
    text = model("Z/2*d(phi,mu)^2 + U(rho)").replace('rho = "phi^2/2"', 'rho = "phi^3"')
    with pytest.raises(InputError, match="not contracted"):
        read_truncation_text(text, source="f")


def test_a_truncation_built_by_hand_can_be_checked():
    truncation = read_truncation_text(model("Z/2*d(phi,mu)^2 + U(rho)"), source="f")
    check_action(truncation)
    phi, mu = sympy.symbols("phi mu")
    free = dataclasses.replace(truncation, lagrangian=truncation.lagrangian + sympy.Function("d")(phi, mu))
    with pytest.raises(InputError, match="index mu is free"):
        check_action(free)
    unknown = dataclasses.replace(truncation, lagrangian=truncation.lagrangian + sympy.Function("W")(phi))
    with pytest.raises(InputError, match=r"not in \[running\]"):
        check_action(unknown)


def test_fields_are_needed():
    text = model("1 + Z*U(rho)").replace('phi = { kind = "scalar", components = "N" }', "")
    text = text.replace('rho = "phi^2/2"', 'rho = "1/2"')
    with pytest.raises(InputError, match=r"\[fields\] is empty"):
        read_truncation_text(text, source="f")
