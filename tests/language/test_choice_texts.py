"""Order ranges and regulator specifications, as typed on a command line or in a file."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from frg.errors import InputError, Place
from frg.language.truncation import RegulatorChoice
from frg.language.values import number_from_text, orders_from_text, regulator_choice_from_text


@pytest.mark.parametrize(
    ("text", "orders"),
    [
        ("2..5", (2, 3, 4, 5)),
        (" 2 .. 5 ", (2, 3, 4, 5)),
        ("2..12:5", (2, 7, 12)),
        ("2..11:5", (2, 7)),
        ("6", (6,)),
        ("2,4,8", (2, 4, 8)),
        ("2..4,8..12:2", (2, 3, 4, 8, 10, 12)),
        ("7..7", (7,)),
    ],
)
def test_orders(text, orders):
    assert orders_from_text(text) == orders


@given(st.integers(0, 200), st.integers(0, 200), st.integers(1, 30))
def test_orders_are_a_range(first, length, step):
    assert orders_from_text(f"{first}..{first + length}:{step}") == tuple(range(first, first + length + 1, step))


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "no order"),
        ("a..b", "no order"),
        ("2...5", "no order"),
        ("-1..5", "no order"),
        ("2..", "no order"),
        ("2.5", "no order"),
        ("5..2", "empty"),
        ("2..5:0", "step"),
        ("2..999999", "above 1000"),
        ("9" * 50, "no order"),
        ("2,2", "must rise"),
        ("4,2", "must rise"),
        ("1..900", "too many"),
        ("\u0662..\u0665", "no order"),
    ],
)
def test_bad_orders(text, words):
    with pytest.raises(InputError, match=words) as caught:
        orders_from_text(text)
    assert caught.value.remedy
    assert caught.value.place.source == "--orders"


@pytest.mark.parametrize(
    ("text", "choice"),
    [
        ("flat", RegulatorChoice(name="flat")),
        ("exponential:alpha=2", RegulatorChoice(name="exponential", parameters={"alpha": 2.0})),
        (
            "theta: alpha = 1/4 , power=3",
            RegulatorChoice(name="theta", parameters={"alpha": 0.25, "power": 3.0}),
        ),
        ("gaussian:alpha=-1.5e-3", RegulatorChoice(name="gaussian", parameters={"alpha": -1.5e-3})),
        (
            "custom:a*exp(-y)*(1+b*y),a=1,b=0.1",
            RegulatorChoice(name="custom", parameters={"a": 1.0, "b": 0.1}, expression="a*exp(-y)*(1+b*y)"),
        ),
        ("custom:exp(-y)", RegulatorChoice(name="custom", expression="exp(-y)")),
    ],
)
def test_regulators(text, choice):
    assert regulator_choice_from_text(text) == choice


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "no name"),
        ("fl at", "no name"),
        ("flat:", "nothing follows"),
        ("flat:alpha", "not of the form"),
        ("flat:alpha=", "empty"),
        ("flat:alpha=1,alpha=2", "twice"),
        ("flat:alpha=1,,", "not of the form"),
        ("flat:alpha=x", "unknown name"),
        ("flat:alpha=1/0", "division by zero"),
        ("flat:alpha=9^9^9", "exponent"),
        ("custom:", "needs its shape"),
        ("custom:exp(-y),y=1", "cannot name"),
        ("x" * 5000, "too long"),
    ],
)
def test_bad_regulators(text, words):
    with pytest.raises(InputError, match=words) as caught:
        regulator_choice_from_text(text)
    assert caught.value.remedy
    assert caught.value.place.source == "--regulator"


def test_numbers():
    where = Place(source="--set")
    assert number_from_text("1/3", place=where) == 1 / 3
    assert number_from_text("-2.7e-1", place=where) == -0.27
    for bad in ("", "x", "inf", "nan", "1e999", "1/0", "1..2"):
        with pytest.raises(InputError):
            number_from_text(bad, place=where)
