"""Whatever is thrown at the language, it answers with a result or an InputError, and soon."""

import time
from pathlib import Path

from hypothesis import given, settings
from hypothesis import strategies as st

from frg.errors import InputError, Place
from frg.language.grammar import parse
from frg.language.names import NameTable
from frg.language.printing import to_text
from frg.language.reader import read_truncation_text
from frg.language.truncation import Truncation
from frg.language.values import orders_from_text, regulator_choice_from_text

TEXTS = [p.read_text(encoding="utf-8") for p in sorted((Path(__file__).parent / "data").glob("*.toml"))]
LONGEST_WAIT = 1.0  # seconds; the usual answer takes milliseconds
NAMES = NameTable(
    names={"x": "parameter", "y": "parameter", "phi": "field"},
    functions={"U": 1, "V": 2},
    differentiable=frozenset({"phi"}),
    lorentz=("mu",),
    thresholds=True,
)
WORDS = [
    "x",
    "y",
    "phi",
    "mu",
    "U",
    "V",
    "U(x)",
    "V(x,y)",
    "diff",
    "d",
    "l",
    "exp",
    "log",
    "sqrt",
    "sin",
    "cos",
    "tan",
    "gamma",
    "zeta",
    "pi",
    "(",
    ")",
    ",",
    "+",
    "-",
    "*",
    "/",
    "^",
    "**",
    "0",
    "1",
    "2",
    "3",
    "9",
    "10",
    "1/2",
    "0.5",
    "1e300",
    "1e-300",
    "1e400",
    "99999999999",
    "log(2)",
    "exp(1)",
    "sqrt(2)",
    "^9",
    "^(1/2)",
    "^-1",
    "d(phi,mu)",
    "diff(U(x),x)",
    "2x",
    ".",
    "'",
    "х",
]
FUNCTIONS = ("exp", "log", "sqrt", "sin", "cos", "tan", "gamma", "zeta", "U")

pieces = st.lists(st.sampled_from(WORDS), max_size=25).map("".join)
nested = st.recursive(
    st.sampled_from(["x", "2", "9", "0.1", "pi", "1/3", "-1"]),
    lambda inner: st.one_of(
        st.builds("({}){}({})".format, inner, st.sampled_from(["+", "-", "*", "/", "^"]), inner),
        st.builds(
            "{}({})".format,
            st.sampled_from(FUNCTIONS),
            inner,
        ),
    ),
    max_leaves=15,
)


def answer(call, *args, **kwargs):
    start = time.perf_counter()
    try:
        return call(*args, **kwargs)
    except InputError as error:
        assert error.message
        assert error.remedy
        assert str(error)
        return None
    finally:
        assert time.perf_counter() - start < LONGEST_WAIT


@settings(max_examples=250, deadline=None)
@given(st.one_of(pieces, nested, st.text(max_size=60)))
def test_expressions(text):
    answer(parse, text, names=NAMES, place=Place(source="fuzz"))


@settings(max_examples=60, deadline=None)
@given(st.text(max_size=200))
def test_any_text_as_a_file(text):
    assert answer(read_truncation_text, text, source="fuzz") is None


@settings(max_examples=60, deadline=None)
@given(st.one_of(st.text(max_size=30), pieces))
def test_orders_and_regulators(text):
    answer(orders_from_text, text)
    answer(regulator_choice_from_text, text)
    answer(regulator_choice_from_text, "custom:" + text)


@st.composite
def damaged(draw):
    lines = draw(st.sampled_from(TEXTS)).split("\n")
    for _ in range(draw(st.integers(1, 3))):
        i = draw(st.integers(0, len(lines) - 1))
        kind = draw(st.sampled_from(["delete", "repeat", "cut", "swap", "word", "character", "end"]))
        line = lines[i]
        at = draw(st.integers(0, len(line)))
        if kind == "delete" and len(lines) > 1:
            del lines[i]
        elif kind == "repeat":
            lines.insert(i, line)
        elif kind == "cut":
            lines[i] = line[:at]
        elif kind == "swap":
            j = draw(st.integers(0, len(lines) - 1))
            lines[i], lines[j] = lines[j], lines[i]
        elif kind == "word":
            lines[i] = line[:at] + draw(st.sampled_from(WORDS)) + line[at:]
        elif kind == "character":
            lines[i] = line[:at] + draw(st.characters(exclude_categories=["Cs"])) + line[at + 1 :]
        else:
            lines = [*lines[:i], line[:at]]
    return "\n".join(lines)


@settings(max_examples=250, deadline=None)
@given(damaged())
def test_damaged_files(text):
    found = answer(read_truncation_text, text, source="fuzz")
    if found is not None:
        assert isinstance(found, Truncation)
        assert read_truncation_text(to_text(found), source="again") == found


@settings(max_examples=60, deadline=None)
@given(st.sampled_from(TEXTS), st.dictionaries(st.sampled_from(["d", "N", "A", "M", "q"]), pieces, max_size=2))
def test_overrides(text, overrides):
    answer(read_truncation_text, text, source="fuzz", overrides=overrides)
