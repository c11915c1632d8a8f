"""The signature changes with everything that can change a number, and with nothing else."""

from __future__ import annotations

import hashlib
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from frg.errors import StoreError
from frg.store.signature import canonical_text, input_differences, signature, signature_of

TEXT = 'title = "t"\n[space]\ndimension = "d"\n[parameters]\nd = 3\n[running]\na = 1\nb = 2\n'
BASE: dict = {
    "truncation_text": TEXT,
    "parameters": {"d": "3", "N": "1/3"},
    "regulator": "flat",
    "regulator_parameters": {"alpha": 1.0},
    "settings": {"orders": [2, 3], "tolerance": 1e-10},
}


def test_it_is_the_sha256_of_the_canonical_text() -> None:
    expected = (
        '{"parameters": {"N": "1/3", "d": "3"}, "regulator": "flat", "regulator_parameters": {"alpha": 1.0}, '
        '"settings": {"orders": [2, 3], "tolerance": 1e-10}, '
        '"truncation": "{\\"space\\": {\\"dimension\\": \\"d\\"}, \\"running\\": {\\"a\\": 1, \\"b\\": 2}}"}'
    )
    assert canonical_text(**BASE) == expected
    assert signature(**BASE) == hashlib.sha256(expected.encode()).hexdigest()


@pytest.mark.parametrize(
    "change",
    [
        {"parameters": {"d": "3", "N": "1/2"}},
        {"parameters": {"d": "3"}},
        {"regulator": "gaussian"},
        {"regulator_parameters": {"alpha": float(np.nextafter(1, 2))}},
        {"settings": {"orders": [2, 3, 4], "tolerance": 1e-10}},
        {"settings": {"orders": [2, 3], "tolerance": 1.0000000000000002e-10}},
        {"settings": {"orders": [2, 3], "tolerance": 1e-10, "more": None}},
        {"truncation_text": TEXT.replace("a = 1", "a = 3")},
        {"truncation_text": TEXT.replace("a = 1\nb = 2", "b = 2\na = 1")},  # another sequence of couplings
        {"truncation_text": "not [ TOML"},
    ],
)
def test_what_can_change_a_number_changes_it(change: dict) -> None:
    assert signature(**{**BASE, **change}) != signature(**BASE)


@pytest.mark.parametrize(
    "change",
    [
        {"truncation_text": "# a comment\n" + TEXT.replace(" = ", "   =  ")},
        {"truncation_text": TEXT.replace('"t"', '"other title"')},
        {"truncation_text": TEXT.replace("d = 3", "d = 4")},  # overridden by the value in force
        {"parameters": {"N": "1/3", "d": "3"}},
        {"regulator_parameters": {"alpha": 1}},
        {"settings": {"tolerance": np.float64(1e-10), "orders": (2, np.int64(3))}},
    ],
)
def test_what_cannot_change_a_number_does_not_change_it(change: dict) -> None:
    assert signature(**{**BASE, **change}) == signature(**BASE)


def test_exact_rationals_are_kept_apart_from_their_doubles() -> None:
    exact = signature(**{**BASE, "settings": {"x": Fraction(1, 3)}})
    assert exact == signature(**{**BASE, "settings": {"x": "1/3"}})
    assert exact != signature(**{**BASE, "settings": {"x": 1 / 3}})


def test_settings_without_a_plain_form_are_refused() -> None:
    nested: list = []
    for _ in range(50):
        nested = [nested]
    for bad in (object(), {1: 2}, 1j, nested, "\ud800", {3}):
        with pytest.raises(StoreError):
            signature(**{**BASE, "settings": {"x": bad}})


NUMBERS = st.dictionaries(st.text("abc", max_size=3), st.floats(allow_nan=False), max_size=4)


@given(NUMBERS, NUMBERS)
def test_equal_signatures_mean_equal_inputs_bit_for_bit(a: dict, b: dict) -> None:
    equal = signature(**{**BASE, "settings": a}) == signature(**{**BASE, "settings": b})
    assert equal == (sorted((k, repr(v)) for k, v in a.items()) == sorted((k, repr(v)) for k, v in b.items()))


def test_differences_are_empty_exactly_where_signatures_agree(samples) -> None:
    one = samples.inputs()
    assert input_differences(one, replace(one, title="other", equations="other", signature="")) == ()
    other = samples.inputs(settings={**one.settings, "starts": 101})
    assert signature_of(other) != one.signature
    assert input_differences(one, other) == ("setting starts: stored 100, asked 101",)
