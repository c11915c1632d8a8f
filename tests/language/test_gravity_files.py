"""Truncations of gravity: what the section [gravity] becomes, its text and its signature."""

import dataclasses
from pathlib import Path

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from frg.language.gravity import CUTOFFS, FAMILIES, MATTER, Gauge, Gravity
from frg.language.printing import canonical_text, to_text
from frg.language.reader import read_truncation, read_truncation_text
from frg.language.truncation import (
    RegulatorChoice,
    RunningCoupling,
    RunningFunction,
    StudySettings,
    Truncation,
)
from frg.store.signature import signature

DATA = Path(__file__).parent / "data"
SHELF = Path(__file__).resolve().parents[2] / "truncations"
SHIPPED = {"eh": SHELF / "einstein_hilbert.toml", "fr": SHELF / "f_of_r.toml", "full": DATA / "gravity.toml"}
a, d, n, R, G, Lambda = sympy.symbols("a d n R G Lambda")
zero, one = sympy.Integer(0), sympy.Integer(1)

FULL = (DATA / "gravity.toml").read_text(encoding="utf-8")


def text_of(name):
    return SHIPPED[name].read_text(encoding="utf-8")


def changed(name, *pairs):
    text = text_of(name)
    for old, new in zip(pairs[::2], pairs[1::2], strict=True):
        assert old in text
        text = text.replace(old, new)
    return text


def read(text, **kwargs):
    return read_truncation_text(text, source="model.toml", **kwargs)


def back(truncation):
    return read_truncation_text(to_text(truncation), source="printed")


def same(value):
    return dict.fromkeys(FAMILIES, value)


# -- what is read ---------------------------------------------------------------------------


def test_einstein_hilbert():
    assert read_truncation(SHIPPED["eh"]) == Truncation(
        title="Einstein-Hilbert gravity",
        reference="M. Reuter, Phys. Rev. D 57 (1998) 971, hep-th/9605030; A. Codello, R. Percacci, C. Rahmede, "
        "Ann. Phys. 324 (2009) 414, arXiv:0805.2909",
        text="",
        source="",
        dimension=d,
        geometry="sphere",
        parameters={"d": sympy.Integer(4)},
        fields=(),
        definitions={},
        running=(RunningCoupling(name="Lambda"), RunningCoupling(name="G")),
        lagrangian=(2 * Lambda - R) / (16 * sympy.pi * G),
        flow=None,
        regulator=RegulatorChoice(name="flat"),
        study=StudySettings(),
        gravity=Gravity(
            metric="g",
            gauge=Gauge(alpha=one, beta=None),
            cutoff="Ia",
            endomorphism=same(zero),
            parametrisation="linear",
            one_loop=False,
            matter=dict.fromkeys(MATTER, zero),
        ),
    )


def test_function_of_the_curvature():
    truncation = read_truncation(SHIPPED["fr"])
    assert truncation.functions == (
        RunningFunction(name="f", of=("R",), about=zero, order=n, coefficients="power"),
    )
    assert truncation.lagrangian == sympy.Function("f")(R)
    assert truncation.fields == ()
    assert truncation.geometry == "sphere"
    assert truncation.study.values == tuple(range(2, 36))
    assert truncation.gravity == Gravity(
        metric="g", gauge=Gauge(alpha=zero, beta=zero), cutoff="Ib", endomorphism=same(a)
    )
    twelfth = read_truncation(SHIPPED["fr"], overrides={"a": "1/12"})
    assert twelfth.gravity == truncation.gravity
    assert twelfth.value(twelfth.gravity.endomorphism["tensor"]) == sympy.Rational(1, 12)


def test_every_key():
    truncation = read(FULL, overrides={"Ns": "1/2"})
    assert truncation.gravity == Gravity(
        metric="h",
        gauge=Gauge(alpha=one, beta=d / 2 - 1),
        cutoff="II",
        endomorphism={"tensor": -a, "vector": zero, "scalar": sympy.Rational(1, 4)},
        parametrisation="exponential",
        one_loop=True,
        matter={
            "scalars": sympy.Symbol("Ns"),
            "dirac": sympy.Rational(45, 2),
            "vectors": 3 * sympy.Symbol("Ns"),
        },
    )
    assert truncation.value(truncation.gravity.matter["vectors"]) == sympy.Rational(3, 2)


def test_defaults():
    start, stop = FULL.index("[gravity]"), FULL.index("[running]")
    plain = Gravity(metric="h", gauge=Gauge(alpha=zero, beta=zero), cutoff="Ib", endomorphism=same(zero))
    for section in ("", "[gravity]\n", "[gravity]\nmatter = {}\n", "[gravity]\nendomorphism = { vector = 0 }\n"):
        truncation = read(FULL[:start] + section + FULL[stop:])
        assert truncation.gravity == plain
        assert back(truncation) == truncation
    assert read(FULL.replace('"metric"', '{ kind = "metric" }')) == read(FULL)


def test_definitions_in_an_action_of_the_metric():
    text = changed("eh", "[running]", '[definitions]\nunit = "16*pi"\n[running]', "16*pi*G", "unit*G")
    truncation = read(text)
    assert truncation.expanded(truncation.lagrangian) == read(text_of("eh")).lagrangian
    assert back(truncation) == truncation


# -- printing back --------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["eh", "fr", "full"])
def test_print_back_equal(name):
    truncation = read(text_of(name))
    again = back(truncation)
    assert again == truncation
    assert to_text(again) == to_text(truncation)
    assert canonical_text(again) == canonical_text(truncation)


def _in_parameters(numerator, denominator, power, name):
    """An expression in the parameters of FULL as text of a TOML value, and what it means."""
    value = sympy.Rational(numerator, denominator) * sympy.Symbol(name) ** power
    return f'"{numerator}/{denominator}*{name}^{power}"', value


numbers = st.one_of(
    st.integers(-99, 99).map(lambda k: (str(k), sympy.Integer(k))),
    st.integers(-999, 999).map(lambda k: (f"{k}e-2", sympy.Rational(k, 100))),
    st.builds(
        _in_parameters, st.integers(-9, 9), st.integers(1, 9), st.integers(0, 3), st.sampled_from(["d", "a", "Ns"])
    ),
)


def tables(keys, *, least=0):
    """Inline tables with some of the keys; the others are 0."""
    some = st.lists(st.sampled_from(keys), unique=True, min_size=least, max_size=len(keys))
    filled = some.flatmap(lambda names: st.fixed_dictionaries(dict.fromkeys(names, numbers)))
    return filled.map(
        lambda found: (
            "{ " + ", ".join(f"{k} = {text}" for k, (text, _) in found.items()) + " }",
            {k: found[k][1] if k in found else zero for k in keys},
        )
    )


gauges = st.one_of(
    st.just(('"harmonic"', Gauge(alpha=one, beta=None))),
    tables(("alpha", "beta"), least=2).map(lambda found: (found[0], Gauge(**found[1]))),
)
endomorphisms = st.one_of(numbers.map(lambda found: (found[0], same(found[1]))), tables(FAMILIES, least=1))
words = {
    "cutoff": st.sampled_from(CUTOFFS).map(lambda word: (f'"{word}"', word)),
    "parametrisation": st.sampled_from(["linear", "exponential"]).map(lambda word: (f'"{word}"', word)),
    "approximation": st.sampled_from(["full", "one-loop"]).map(lambda word: (f'"{word}"', word)),
}


@settings(max_examples=60, deadline=None)
@given(st.fixed_dictionaries({"gauge": gauges, "endomorphism": endomorphisms, "matter": tables(MATTER), **words}), st.data())
def test_any_section_is_read_exactly_and_prints_back_equal(keys, data):
    order = data.draw(st.permutations(list(keys)))
    lines = "\n".join(f"{key} = {keys[key][0]}" for key in order)
    start, stop = FULL.index("[gravity]"), FULL.index("[running]")
    truncation = read(f"{FULL[:start]}[gravity]\n{lines}\n{FULL[stop:]}")
    meant = {key: value for key, (_, value) in keys.items()}
    one_loop = meant.pop("approximation") == "one-loop"
    assert truncation.gravity == Gravity(metric="h", one_loop=one_loop, **meant)
    again = back(truncation)
    assert again == truncation
    assert canonical_text(again) == canonical_text(truncation)


def test_sections_built_by_hand_print_back_equal():
    gravity = Gravity(metric="h", gauge=Gauge(alpha=a, beta=None), cutoff="III", endomorphism=same(sympy.sqrt(2) * a))
    truncation = dataclasses.replace(read(FULL), gravity=dataclasses.replace(gravity, gauge=Gauge(alpha=a, beta=d)))
    assert back(truncation) == truncation
    assert gravity.matter == dict.fromkeys(MATTER, zero)


# -- signatures -----------------------------------------------------------------------------


def sign(text):
    return signature(
        truncation_text=text, parameters={}, regulator="flat", regulator_parameters={"alpha": 1.0}, settings={"order": 1}
    )


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("alpha = 1", "alpha = 2"),
        ('"d/2 - 1"', '"d/2"'),
        ('{ alpha = 1, beta = "d/2 - 1" }', '"harmonic"'),
        ('cutoff = "II"', 'cutoff = "III"'),
        ('cutoff = "II"', 'cutoff = "Ia"'),
        ('tensor = "-a"', 'tensor = "a"'),
        ('tensor = "-a"', 'vector = "-a"'),
        ("scalar = 0.25", "scalar = 0.5"),
        ('{ tensor = "-a", scalar = 0.25 }', '"a"'),
        ('"exponential"', '"linear"'),
        ('"one-loop"', '"full"'),
        ('scalars = "Ns"', 'scalars = "Ns + 1"'),
        ('dirac = "45/2"', "dirac = 22"),
        ('vectors = "3*Ns"', "vectors = 12"),
        ('h = "metric"', 'k = "metric"'),
    ],
)
def test_a_change_of_any_key_changes_text_and_signature(old, new):
    text = changed("full", old, new)
    assert canonical_text(read(text)) != canonical_text(read(FULL))
    assert sign(text) != sign(FULL)


def test_layout_and_comments_change_neither():
    section = FULL[FULL.index("[gravity]") : FULL.index("[running]")]
    spaced = section.replace(" = ", "   =  ").replace("\n", "  # a remark\n\n").replace("{ ", "{")
    text = FULL.replace(section, "# gravity\n" + spaced).replace("gravity with matter", "another title")
    assert canonical_text(read(text)) == canonical_text(read(FULL))
    assert sign(text) == sign(FULL)


def test_equal_values_written_otherwise_have_the_same_canonical_text():
    text = changed("full", '"d/2 - 1"', '"-1 + 0.5*d"', '"45/2"', "22.5", '"3*Ns"', '"Ns*6/2"', "0.25", "25e-2")
    moved = text.replace('parametrisation = "exponential"\n', "").replace('"II"', '"II"\nparametrisation = "exponential"')
    assert canonical_text(read(moved)) == canonical_text(read(FULL))
