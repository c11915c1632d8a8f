"""Truncations of gravity that are refused: one clear error with place and remedy for each bad input, and soon."""

import dataclasses
import time
from pathlib import Path

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from frg.errors import InputError
from frg.language.curvature import HIGHEST_POWER, check_curvature_action
from frg.language.printing import to_text
from frg.language.reader import read_truncation_text

DATA = Path(__file__).parent / "data"
SHELF = Path(__file__).resolve().parents[2] / "truncations"
FILES = {"eh": SHELF / "einstein_hilbert.toml", "fr": SHELF / "f_of_r.toml"}
LONGEST_WAIT = 2.0  # seconds; the usual answer takes milliseconds
ACTION = '"(2*Lambda - R)/(16*pi*G)"'
LAST = 'G      = { kind = "coupling" }'
METRIC = 'g = "metric"'
SECOND = ("[action]", 'h = { kind = "function", of = "R", about = 0, order = "n" }\n[action]')


def text_of(name):
    return FILES.get(name, DATA / f"{name}.toml").read_text(encoding="utf-8")


def changed(name, *pairs):
    text = text_of(name)
    for old, new in zip(pairs[::2], pairs[1::2], strict=True):
        assert old in text
        text = text.replace(old, new)
    return text


def read(text):
    return read_truncation_text(text, source="model.toml")


def error_of(text):
    start = time.perf_counter()
    with pytest.raises(InputError) as caught:
        read(text)
    assert time.perf_counter() - start < LONGEST_WAIT
    error = caught.value
    assert error.exit_code == 2
    assert error.place.source == "model.toml"
    assert error.place.line is not None
    assert error.remedy
    assert "**" not in str(error)
    return error


def placed(text, fragment):
    """Line and column of a fragment, counted without the reader's help."""
    before = text[: text.index(fragment)]
    return before.count("\n") + 1, len(before) - (before.rfind("\n") + 1) + 1


def check(text, fragment, expected):
    error = error_of(text)
    for word in expected:
        assert word in str(error)
    assert (error.place.line, error.place.column) == placed(text, fragment)


@pytest.mark.parametrize(
    ("old", "new", "fragment", "expected"),
    [
        ('cutoff = "II"', 'cutof = "II"', "cutof ", ["unknown key 'cutof'", "did you mean 'cutoff'"]),
        ('cutoff = "II"', 'colour = "II"', "colour", ["unknown key 'colour'", "known here", "parametrisation"]),
        ('cutoff = "II"', 'cutoff = "ib"', 'ib"', ["'ib'", "did you mean 'Ib'", '"III"']),
        ('cutoff = "II"', 'cutoff = "IV"', 'IV"', ["'IV'", '"Ia", "Ib", "II", "III"']),
        ('cutoff = "II"', "cutoff = 2", "2\n", ["cutoff is 2", '"Ia"']),
        ('{ alpha = 1, beta = "d/2 - 1" }', '"harmonc"', "harmonc", ["'harmonc'", "did you mean 'harmonic'"]),
        ('{ alpha = 1, beta = "d/2 - 1" }', '"Landau"', "Landau", ["'Landau'", '"harmonic"']),
        ('{ alpha = 1, beta = "d/2 - 1" }', "1.5", "1.5", ["no gauge is called 1.5", "alpha = 0, beta = 0"]),
        (', beta = "d/2 - 1"', "", "gauge", ["the gauge has no beta", "alpha = 0, beta = 0"]),
        ("alpha = 1, ", "", "gauge", ["the gauge has no alpha"]),
        ("beta = ", "betta = ", "betta", ["unknown key 'betta'", "did you mean 'beta'"]),
        ("alpha = 1", "alpha = nan", "nan", ["gauge.alpha is not finite"]),
        ("alpha = 1", 'alpha = "1/(d-4)"', "1/(d-4)", ["division by zero"]),
        ("scalar = 0.25", "scalar = inf", "inf", ["endomorphism.scalar is not finite"]),
        ("scalar = 0.25", "scalar = -nan", "-nan", ["not finite"]),
        ("scalar = 0.25", "scalar = false", "false", ["endomorphism.scalar must be a number"]),
        ("scalar = 0.25", "skalar = 0.25", "skalar", ["did you mean 'scalar'"]),
        ("scalar = 0.25", 'scalar = "R"', 'R" }', ["unknown name 'R'", "[parameters]"]),
        ('{ tensor = "-a", scalar = 0.25 }', "[1]", "[1]", ["endomorphism must be a number"]),
        ('{ tensor = "-a", scalar = 0.25 }', "true", "true", ["endomorphism must be a number"]),
        ('{ tensor = "-a", scalar = 0.25 }', '"one"', 'one"', ["unknown name 'one'", "[parameters]"]),
        ('{ tensor = "-a", scalar = 0.25 }', "{}", "{}", ["endomorphism is empty", "endomorphism = 0"]),
        ('scalars = "Ns"', 'scalars = "Nf"', 'Nf"', ["unknown name 'Nf'", "[parameters]", "Ns"]),
        ('scalars = "Ns"', "scalars = inf", "inf", ["matter.scalars is not finite"]),
        ('scalars = "Ns"', "fermions = 1", "fermions", ["unknown key 'fermions'", "dirac"]),
        ('scalars = "Ns"', 'scalar = "Ns"', 'scalar = "Ns"', ["did you mean 'scalars'"]),
        ('{ scalars = "Ns", dirac = "45/2", vectors = "3*Ns" }', "4", "4\n[running]", ["by kind", "scalars = 4"]),
        ('"exponential"', '"exponental"', "exponental", ["did you mean 'exponential'"]),
        ('"one-loop"', '"two-loop"', "two-loop", ["did you mean 'one-loop'", '"full"']),
        ("[gravity]", "[[gravity]]", "gravity]]", ["gravity must be a table"]),
    ],
)  # fmt: skip
def test_bad_sections(old, new, fragment, expected):
    check(changed("gravity", old, new), fragment, expected)


@pytest.mark.parametrize(
    ("name", "pairs", "fragment", "expected"),
    [
        ("eh", ('"sphere"', '"flat"'), 'metric"', ["metric", 'geometry = "sphere"', "[space]"]),
        ("eh", ('geometry  = "sphere"', ""), 'metric"', ["metric", 'write geometry = "sphere" in [space]']),
        ("eh", ('"sphere"', '"spher"'), 'spher"', ["did you mean 'sphere'"]),
        ("eh", (METRIC, ""), 'sphere"', ["needs a metric", 'g = "metric"']),
        ("eh", ("[fields]\n" + METRIC, ""), 'sphere"', ["needs a metric", '[fields] with g = "metric"']),
        ("eh", (METRIC, 'g = "metrik"'), "g = ", ["g is no metric", 'write g = "metric"']),
        ("eh", (METRIC, METRIC + '\nh = "metric"'), "h = ", ["h is a second metric", "remove h"]),
        ("eh", (METRIC, METRIC + '\nphi = "scalar"'), "phi", ["phi is a scalar field", "[gravity] matter"]),
        ("eh", (METRIC, METRIC + '\nphi = { kind = "scalar" }'), "phi", ["phi is a scalar", "[gravity] matter"]),
        ("eh", (METRIC, METRIC + '\npsi = { kind = "dirac" }'), "psi", ["psi is a dirac field", "[gravity] matter"]),
        ("eh", (METRIC, METRIC + "\nphi = 3"), "phi", ["phi is no metric", "remove phi"]),
        ("eh", (METRIC, 'g = { kind = "metric", flavours = 2 }'), "flavours", ["unknown key 'flavours'"]),
        ("on_model", ("[study]", "[gravity]\n[study]"), "gravity]", ['geometry = "sphere"', "[space]"]),
        ("one_coupling", ("[flow]", "[gravity]\n[flow]"), "gravity]", ["[action]", "remove it"]),
        ("one_coupling", ("[flow]", '[fields]\nh = "metric"\n[flow]'), 'metric"', ["[action]", "remove it"]),
        ("eh", ("d = 4", "d = 4\nR = 1"), "R = 1", ["'R' is the curvature scalar", "another name"]),
        ("eh", (METRIC, 'R = "metric"'), "R = ", ["'R' is the curvature scalar", "another name"]),
        ("eh", ("G      =", "R ="), "R = {", ["'R' is the curvature scalar"]),
        ("eh", ("d = 4", "d = 4\ng = 1"), "g = \"", ["'g' is already the name of a parameter"]),
        ("fr", ('of = "R"', 'of = "S"'), 'S"', ["f is a function of 'S'", 'of = "R"']),
        ("fr", ('of = "R"', 'of = "g"'), 'g", a', ["f is a function of 'g'", 'of = "R"']),
        ("fr", ('of = "R"', 'of = ["R", "S"]'), "[\"R\"", ["function of 'S'", 'of = "R"']),
    ],
)  # fmt: skip
def test_bad_fields_and_names(name, pairs, fragment, expected):
    check(changed(name, *pairs), fragment, expected)


@pytest.mark.parametrize(
    ("pairs", "fragment", "expected"),
    [
        (("f(R)\"", "f(R) + R\""), "f(R) + R", ["that function alone", 'lagrangian = "f(R)"']),
        (("f(R)\"", "2*f(R)\""), "2*f(R)", ["that function alone", 'lagrangian = "f(R)"']),
        (("f(R)\"", "f(R^2)\""), "f(R^2)", ["f(R^2) is not a function of R alone", "write f(R)"]),
        (("f(R)\"", "f(a)\""), "f(a)", ["f(a) is not a function of R alone", "write f(R)"]),
        (("f(R)\"", "f(R, a)\""), "f(R, a)", ["1 argument, not 2"]),
        (("f(R)\"", "R + diff(f(R), R)\""), "diff", ["derivatives of running functions", "the function itself"]),
        (("f(R)\"", "R\""), "R\"\n\n[reg", ["f is declared in [running] and never used"]),
        ((*SECOND, "f(R)\"", "f(R) + h(R)\""), "f(R) + h(R)", ["f and h are both functions of R", "keep one"]),
        (SECOND, "f(R)\"\n", ["f and h are both functions of R", "keep one"]),
        (("f(R)\"", "g*f(R)\""), "g*f", ["the metric g enters through R only"]),
        (("[action]", 'c = { kind = "coupling" }\n[action]'), "f(R)\"\n", ["c is declared", "never used"]),
    ],
)  # fmt: skip
def test_bad_actions_with_a_function(pairs, fragment, expected):
    check(changed("fr", *pairs), fragment, expected)


@pytest.mark.parametrize(
    ("action", "fragment", "expected"),
    [
        ("(2*Lambda - sqrt(R))/G", None, ["not a polynomial in R", "whole powers"]),
        ("(2*Lambda - R)/G + 1/R", None, ["not a polynomial in R", "whole powers"]),
        ("(2*Lambda - exp(R))/G", None, ["not a polynomial in R"]),
        ("(2*Lambda - R^(d/2))/G", None, ["not a polynomial in R"]),
        ("R^Lambda/G", None, ["not a polynomial in R"]),
        ("Lambda + G", None, ["2 couplings and only 1 power of R", "a power of R of its own"]),
        ("Lambda - R", None, ["G is declared in [running] and never used", "remove it from [running]"]),
        ("3", "3\"\n", ["Lambda is declared in [running] and never used"]),
        ("(2*Lambda - R)/G + d(phi,mu)^2/2", "d(phi,mu)", ["derivatives of fields", "[gravity] matter"]),
        ("(2*Lambda - R)/G + d(g, mu)^2", "d(g, mu)", ["derivatives of fields", "[gravity] matter"]),
        ("(2*Lambda - R)/G + g", "g\"\n", ["the metric g enters through R only", "functions of R"]),
        ("(2*Lambda - R)/G + phi^2", "phi^2", ["unknown name 'phi'", "declare it"]),
        ("(2*Lambda - R)/G + F(R)", "F(R)", ["F is called as a function", "[running]"]),
        (f"2*Lambda/G - R^{HIGHEST_POWER + 1}", None, [f"power {HIGHEST_POWER + 1} of R", str(HIGHEST_POWER)]),
        ("((2*Lambda - R)^100 + 1)^100/G", None, ["too many terms"]),
        ("R/(1 + G)^900 + 1/(Lambda + (1 + G)^900)^900", None, ["too many terms"]),
        ("exp((Lambda + G)^900)*R", None, ["too many terms"]),
        ("R/(" + "*".join(f"({k} + G)^900" for k in range(1, 60)) + ") + 1/Lambda", None, ["too many terms"]),
    ],
)  # fmt: skip
def test_bad_actions_with_couplings(action, fragment, expected):
    check(changed("eh", ACTION, f'"{action}"'), fragment or action, expected)


def test_more_couplings_than_powers():
    text = changed("eh", LAST, LAST + '\nc = { kind = "coupling" }', ACTION, '"(2*Lambda - R)/G + c"')
    check(text, "(2*Lambda", ["3 couplings and only 2 powers of R"])


def test_a_wave_function_has_no_place():
    text = changed("eh", LAST, LAST + '\nZ = { kind = "wave-function" }', ACTION, '"Z*(2*Lambda - R)/G"')
    check(text, "Z*(", ["wave function Z", "make Z a coupling"])


def test_the_metric_in_a_definition():
    text = changed("eh", "[running]", '[definitions]\nx = "g^2"\n[running]', ACTION, '"(2*Lambda - R)/G + x"')
    check(text, "(2*Lambda", ["the metric g enters through R only"])


def test_no_action():
    text = changed("eh", f"lagrangian = {ACTION}", "")
    check(text, "action]", ["no lagrangian", 'lagrangian = "f(R)"'])


def test_a_truncation_built_by_hand_is_checked_too():
    R, G, Lambda = sympy.symbols("R G Lambda")
    derivative = sympy.Function("d")(sympy.Symbol("phi"), sympy.Symbol("mu"))
    truncation = read(text_of("gravity"))
    check_curvature_action(truncation)
    for bad in (truncation.lagrangian + derivative**2, sympy.sqrt(R) * Lambda * G, sympy.Function("F")(R), Lambda * G):
        with pytest.raises(InputError):
            check_curvature_action(dataclasses.replace(truncation, lagrangian=bad))


# -- damaged files --------------------------------------------------------------------------

PIECES = ["R", "g", "a", "d", "f(R)", "(", ")", "{", "}", '"', ",", "=", "^", "/", "-1", "0", "nan", "metric", "Ib", "sphere"]


@st.composite
def damaged(draw):
    lines = [line for line in text_of(draw(st.sampled_from(["eh", "fr", "gravity"]))).split("\n") if line]
    for _ in range(draw(st.integers(1, 3))):
        i, j = (draw(st.integers(0, len(lines) - 1)) for _ in range(2))
        at = draw(st.integers(0, len(lines[i])))
        lines[i] = draw(
            st.sampled_from(["", lines[j], lines[i][:at] + lines[i][at + 1 :]])
            | st.sampled_from(PIECES).map(lambda piece, i=i, at=at: lines[i][:at] + piece + lines[i][at:])
        )
    return "\n".join(lines)


@settings(max_examples=120, deadline=None)
@given(damaged())
def test_damaged_files(text):
    start = time.perf_counter()
    try:
        truncation = read(text)
    except InputError as error:
        assert error.message and error.remedy and error.place.source
    else:
        assert read_truncation_text(to_text(truncation), source="again") == truncation
    assert time.perf_counter() - start < LONGEST_WAIT
