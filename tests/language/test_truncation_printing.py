"""A truncation prints itself back as a file that reads equal; canonical text is blind to layout."""

import dataclasses
from pathlib import Path

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from frg.errors import InputError
from frg.language.printing import canonical_text, to_text
from frg.language.reader import read_truncation, read_truncation_text
from frg.language.truncation import (
    Grid,
    RegulatorChoice,
    RunningCoupling,
    RunningFunction,
    ScalarField,
    StudySettings,
    Truncation,
    WaveFunction,
)
from frg.language.wording import expression_text

FILES = sorted((Path(__file__).parent / "data").glob("*.toml"))
n, N, d, eps = sympy.symbols("n N d eps")
phi, chi, rho, tau, g, h, mu = sympy.symbols("phi chi rho tau g h mu")
D, U, V, THRESHOLD = (sympy.Function(name) for name in ("d", "U", "V", "l"))


def back(truncation):
    return read_truncation_text(to_text(truncation), source="printed")


@pytest.mark.parametrize("path", FILES, ids=lambda p: p.stem)
def test_files_print_back_equal(path):
    truncation = read_truncation(path)
    again = back(truncation)
    assert again == truncation
    assert to_text(again) == to_text(truncation)
    assert canonical_text(again) == canonical_text(truncation)


def test_overrides_are_printed():
    path = next(p for p in FILES if p.stem == "on_model")
    changed = read_truncation(path, overrides={"d": "2.7"})
    assert back(changed) == changed
    assert back(changed) != read_truncation(path)


def test_canonical_text_is_blind_to_layout_and_names_of_the_file_only():
    path = next(p for p in FILES if p.stem == "on_model")
    text = path.read_text(encoding="utf-8")
    plain = canonical_text(read_truncation(path))
    other = text.replace('"Z/2*d(phi,mu)^2 + U(rho)"', '"U( rho )+0.5*Z*d(phi,mu)**2"  # the same')
    other = other.replace("title     = ", "title = 'another'\n#").replace("d = 3\n", "d = 3.0\n")
    assert canonical_text(read_truncation_text(other, source="f")) == plain
    for old, new in [("N = 1", "N = 2"), ('"minimum"', "0"), ('"flat"\n\n[study]', '"sharp"\n\n[study]')]:
        assert old in text
        assert canonical_text(read_truncation_text(text.replace(old, new), source="f")) != plain


def test_expressions_outside_the_grammar_cannot_be_printed():
    for bad in (sympy.I, sympy.oo, sympy.sinh(g), sympy.zeta(g, 2), sympy.Integral(g, g), sympy.Abs(g)):
        with pytest.raises(InputError, match="cannot be written"):
            expression_text(bad + 1)


def test_texts_with_quotes_and_control_characters():
    truncation = read_truncation(FILES[0])
    title = 'a "b" \\ c\n\té \x01\x7f \U0001f600'
    assert back(dataclasses.replace(truncation, title=title, reference=title)).title == title


rationals = st.builds(sympy.Rational, st.integers(-50, 50), st.integers(1, 12))
positive = st.builds(sympy.Rational, st.integers(1, 50), st.integers(1, 12))
finite = st.floats(min_value=0.01, max_value=100.0, allow_nan=False)
titles = st.text(st.characters(exclude_categories=["Cs"]), max_size=30)


def polynomials(symbols):
    powers = st.lists(st.integers(0, 3), min_size=len(symbols), max_size=len(symbols))
    monomial = st.builds(
        lambda c, ks: c * sympy.Mul(*(s**k for s, k in zip(symbols, ks, strict=True))), rationals, powers
    )
    return st.builds(lambda ms: sympy.Add(*ms), st.lists(monomial, min_size=1, max_size=4))


points = st.one_of(st.just("minimum"), rationals, polynomials([eps]))
orders = st.builds(lambda a, b: a * n + b, st.integers(1, 2), st.integers(0, 3))
regulators = st.one_of(
    st.builds(lambda a, b: RegulatorChoice(name="theta", parameters={"alpha": a, "power": b}), finite, finite),
    st.builds(lambda a: RegulatorChoice(name="custom", expression="a*exp(-y)", parameters={"a": a}), finite),
    st.just(RegulatorChoice(name="flat")),
)
studies = st.builds(
    lambda vs: StudySettings(order="n", values=tuple(sorted(vs))), st.sets(st.integers(2, 60), max_size=6)
)


def functions(name, of):
    expanded = st.builds(
        lambda about, order, coefficients: RunningFunction(
            name=name, of=of, about=about, order=order, coefficients=coefficients
        ),
        points,
        orders,
        st.sampled_from(["derivative", "power"]),
    )
    grid = st.builds(
        lambda points, upto: RunningFunction(
            name=name, of=of, about=None, order=None, grid=Grid(points=points, upto=upto)
        ),
        st.integers(4, 90),
        finite,
    )
    return st.one_of(expanded, grid) if len(of) == 1 else expanded


@st.composite
def actions(draw):
    two = draw(st.booleans())
    of = ("rho", "tau") if two else ("rho",)
    wave = draw(
        st.none() | st.builds(WaveFunction, name=st.just("Z"), at=points, mode=st.sampled_from(["auto", "radial"]))
    )
    function = draw(functions("U", of))
    kinetic = D(phi, mu) ** 2 / 2 * (1 if wave is None else sympy.Symbol("Z"))
    extra = draw(polynomials([phi**2, chi, eps])) * g
    lagrangian = kinetic + D(chi, mu) ** 2 / 2 + U(*(sympy.Symbol(c) for c in of))
    running = [function]
    if extra != 0:
        running.append(RunningCoupling(name="g"))
    if wave is not None:
        running.append(wave)
    return Truncation(
        title=draw(titles),
        reference=draw(st.none() | titles),
        text="",
        source="by hand",
        dimension=draw(positive | st.just(d)),
        geometry="flat",
        parameters={"d": draw(positive), "N": draw(rationals), "eps": draw(rationals)},
        fields=(ScalarField(name="phi", components=N), ScalarField(name="chi", components=sympy.Integer(1))),
        definitions={"rho": phi**2 / 2, "tau": draw(rationals) + chi * rho + N},
        running=tuple(running),
        lagrangian=lagrangian + extra,
        flow=None,
        regulator=draw(regulators),
        study=draw(studies),
    )


@st.composite
def flows(draw):
    jets = [U(rho), sympy.Derivative(U(rho), rho), sympy.Derivative(U(rho), (rho, 2))]
    w = draw(polynomials([rho, *jets]))
    loop = THRESHOLD(draw(st.integers(0, 3)), w) * sympy.Symbol("vd") + THRESHOLD(0, w / (1 + rho) ** 2, eps)
    return Truncation(
        title=draw(titles),
        reference=None,
        text="",
        source="by hand",
        dimension=draw(positive),
        geometry="flat",
        parameters={"eps": draw(rationals)},
        fields=(),
        definitions={"a": sympy.sqrt(eps**2 + 1) * sympy.pi},
        running=(draw(functions("U", ("rho",))), RunningCoupling(name="g"), RunningCoupling(name="h")),
        lagrangian=None,
        flow={
            "U": draw(polynomials([rho, *jets])) + loop,
            "g": draw(polynomials([g, h, eps])),
            "h": draw(polynomials([g, h])) / (draw(positive) * (1 + g) ** 2),
        },
        regulator=draw(regulators),
        study=draw(studies),
    )


@settings(max_examples=60, deadline=None)
@given(st.one_of(actions(), flows()))
def test_truncations_built_by_hand_print_back_equal(truncation):
    again = back(truncation)
    assert again == truncation
    assert canonical_text(again) == canonical_text(truncation)
