"""Values with errors and lists of exponents. Expected texts: common practice (error in units of the last digit), no source."""

from __future__ import annotations

import math
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from frg.show.numbers import correlation_exponent, format_complex, format_exponents, value_with_error

COMPACT = re.compile(r"(-?\d+\.(\d+))\((\d+)\)(?:e([+-]\d+))?")


@pytest.mark.parametrize("value, error, text", [
    (0.64956177, 2.6e-8, "0.64956177(3)"),
    (0.65574593, 1.2e-7, "0.65574593(12)"),
    (-0.7471, 0.0029, "-0.747(3)"),
    (9.99, 0.0099, "9.990(10)"),
    (1e-20, 1e-22, "1.000(10)e-20"),
    (1373.04, 3.0, "1373 ± 3"),
    (15.0, 0.5, "15.0(5)"),
    (0.5, 0.5, "0.5 ± 0.5"),
    (0.0, 1e-3, "0 ± 0.001"),
    (1e-9, 1e-3, "1e-09 ± 0.001"),
    (9e-8, 5e-8, "9e-08 ± 5e-08"),
    (9e-8, 5e-9, "9.0(5)e-08"),
    (1.25, 0.0, "1.25"),
    (1.25, math.inf, "1.25 (error unknown)"),
    (1.25, math.nan, "1.25 (error unknown)"),
    (1.25, -1.0, "1.25 (error unknown)"),
    (1.5, 5e-324, "1.5"),
    (1e300, 1e-5, "1e+300"),
    (math.nan, 0.1, "undefined"),
    (math.inf, 0.1, "undefined"),
    (complex(-3.625, 1.27), 2e-3, "-3.625(2)±1.270(2)i"),
    (complex(-3.625, -1.27), 2e-3, "-3.625(2)±1.270(2)i"),
    (complex(-3.6, 1.2), 0.5, "-3.6±1.2i (error 0.5)"),
    (complex(-3.6, 1.2), math.inf, "-3.6±1.2i (error unknown)"),
    (complex(-3.6, math.nan), 0.1, "undefined"),
])
def test_value_with_error(value: complex, error: float, text: str) -> None:
    assert value_with_error(value, error) == text


def test_numbers_of_arrays_look_like_numbers() -> None:
    assert value_with_error(np.float64(1.25), np.float64(0)) == "1.25"
    assert value_with_error(np.complex128(1.25), np.float64(0.01)) == "1.250(10)"


@given(st.floats(allow_nan=True, allow_infinity=True), st.floats(allow_nan=True, allow_infinity=True))
def test_any_pair_is_written_short(value: float, error: float) -> None:
    text = value_with_error(value, error)
    assert text and len(text) < 45


@given(st.floats(1e-12, 1e12), st.floats(1e-12, 0.5), st.booleans())
def test_compact_text_covers_value_and_error(size: float, relative: float, negative: bool) -> None:
    """Read back, the digits lie within the error, and the bracket is no smaller than the error and less than twice it."""
    value, error = (-size if negative else size), size * relative
    read = COMPACT.fullmatch(value_with_error(value, error))
    if read is None:
        assert " ± " in value_with_error(value, error)
        return
    scale = 10.0 ** int(read[4] or 0)
    shown = int(read[3]) * 10.0 ** -len(read[2]) * scale
    assert abs(float(read[1]) * scale - value) <= 0.51 * error + 1e-15 * size
    assert error * (1 - 1e-6) <= shown <= 1.51 * error + 1e-15 * size


def test_exponents_merge_pairs_and_count_the_rest() -> None:
    theta = np.array([1.5, -0.6, -2.425 + 1.27j, -2.425 - 1.27j, -6.0, -7 + 1j, -7 - 1j])
    assert format_exponents(theta, 4) == "1.5, -0.6, -2.425±1.27i, -6, … +2"
    assert format_exponents(theta, 5) == "1.5, -0.6, -2.425±1.27i, -6, -7±1i"
    assert format_exponents(theta[:2], 5) == "1.5, -0.6"
    assert format_exponents([], 5) == ""


def test_pairs_of_equal_real_part_may_be_interleaved() -> None:
    assert format_exponents([1 + 2j, 1 + 3j, 1 - 3j, 1 - 2j], 5) == "1±2i, 1±3i"
    assert format_exponents([1 + 2j, 1 + 2j, 1 - 2j, 1 - 2j], 5) == "1±2i, 1±2i"


def test_equal_real_exponents_stay_apart() -> None:
    assert format_exponents([1.0, 1.0, -0.0, complex(math.nan, 0)], 5) == "1, 1, 0, -"


@given(st.lists(st.complex_numbers(max_magnitude=50, allow_nan=False), max_size=9), st.integers(1, 9))
def test_every_exponent_is_shown_or_counted(values: list[complex], most: int) -> None:
    theta = [w for v in values for w in ((v, v.conjugate()) if abs(v.imag) > 1e-3 else (complex(v.real),))]
    text = format_exponents(theta, most)
    rest = int(text.split("… +")[1]) if "… +" in text else 0
    shown = [part for part in text.split(", ") if part and "…" not in part]
    assert len(shown) <= most
    assert sum(2 if "±" in part else 1 for part in shown) + rest == len(theta)


@pytest.mark.parametrize("theta, nu", [
    (2.0, 0.5), (-1.0, None), (0.0, None), (1 + 1j, None), (math.nan, None), (math.inf, None),
])
def test_nu_only_of_a_real_relevant_direction(theta: complex, nu: float | None) -> None:
    assert correlation_exponent(complex(theta)) == nu


def test_complex_text() -> None:
    assert format_complex(-0.0 + 1e-14j) == "0"
    assert format_complex(complex(1, math.inf)) == "-"
