"""What every regulator must do: the shared test of the plug-in point."""

from __future__ import annotations

import dataclasses
import math

import mpmath
import numpy as np
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from frg.errors import InputError
from frg.regulator.base import AbstractRegulator
from frg.regulator.shapes import Custom, Exponential, Flat, Gaussian, Mass, Power, Sharp, Theta
from frg.regulator.tables import shape_table
from tests.regulator.cases import BUMP, LORENTZ, REGULATORS, SHAPES, label


@pytest.mark.parametrize("case", SHAPES, ids=label)
def test_symbolic_shape_is_the_shape_and_its_tables_are_its_derivatives(case: tuple) -> None:
    """Reference: mpmath's numerical differentiation of a second way of writing the shape down."""
    regulator, written = case
    top = min(regulator.support, 4.0)
    y = np.array([1e-3, 0.1, 0.45, 0.9]) * top
    table = shape_table(regulator.shape(), regulator.parameters, 3)(y)
    with mpmath.workdps(60):
        for i, point in enumerate(y):
            for k in range(4):
                expected = mpmath.diff(written, mpmath.mpf(point), k, h=mpmath.mpf(10) ** -15)
                assert table[k, i] == pytest.approx(float(expected), rel=1e-14, abs=1e-20)


@pytest.mark.parametrize("y", [1e-3, 1e-6, 1e-9])
def test_tables_do_not_cancel_at_small_momenta(y: float) -> None:
    """y/(exp(y)-1) = sum_n B_n y^n/n!, the generating function of the Bernoulli numbers."""
    table = shape_table(Exponential().shape(), Exponential().parameters, 6)(np.array([y]))[:, 0]
    for k in range(7):
        terms = [float(sympy.bernoulli(n)) * y ** (n - k) / math.factorial(n - k) for n in range(max(k, 2), k + 9)]
        low = {0: 1 - y / 2, 1: -0.5}.get(k, 0.0)
        assert table[k] == pytest.approx(low + sum(terms), rel=1e-15, abs=1e-300)


@pytest.mark.parametrize("regulator", REGULATORS, ids=label)
def test_shapes_are_bounded_at_the_origin_and_vanish_far_out(regulator: AbstractRegulator) -> None:
    table = shape_table(regulator.shape(), regulator.parameters, 1)
    if regulator.name not in ("power", "mass"):
        s = table(np.array([1e-12, 1e-6]))[0]
        assert np.isfinite(s).all() and s[0] == pytest.approx(s[1], rel=1e-4)
    if regulator.name == "mass":
        return
    far = regulator.support * (1 - 1e-12) if math.isfinite(regulator.support) else 1e6
    assert 0 <= table(np.array([far]))[0, 0] < 1e-8


@pytest.mark.parametrize("regulator", REGULATORS, ids=label)
def test_lowest_is_the_least_regulated_propagator(regulator: AbstractRegulator) -> None:
    rule = regulator.rule(3.0, derivatives=1, accuracy=1e-4)
    table = shape_table(regulator.shape(), regulator.parameters, 1)
    y = np.concatenate([np.geomspace(1e-9, 1, 400), np.linspace(1.001, 12, 300)])
    P = np.where(y <= regulator.support, y + table(np.minimum(y, regulator.support * (1 - 1e-12)))[0], y)
    assert rule.lowest <= P.min() * (1 + 1e-15)
    assert rule.lowest == pytest.approx(P.min(), rel=1e-3)


def test_lowest_in_closed_form() -> None:
    """Elementary: P is least at the origin, at the edge, or where P' = 0."""
    exact = {
        Flat(): 1.0, Flat(alpha=0.5): 0.5, Flat(alpha=3.0): 1.0, Theta(power=2.0): 0.75, Theta(alpha=0.25, power=2.0): 0.25,
        Exponential(): 1.0, Exponential(s=4.0): 0.25, Exponential(alpha=2.0): 2.0, Gaussian(): 1.0,
        Gaussian(alpha=math.e): 2.0, Gaussian(alpha=0.25): 0.25, Power(b=1.0): 2.0, Mass(alpha=0.7): 0.7,
    }
    for regulator, lowest in exact.items():
        assert regulator.rule(2.5, accuracy=1e-4).lowest == pytest.approx(lowest, rel=4e-16), regulator


@settings(max_examples=15, deadline=None)
@given(alpha=st.floats(0.05, 50), s=st.floats(0.1, 10))
def test_exponential_rules_hold_for_any_parameters(alpha: float, s: float) -> None:
    """l_2^4(0) = 1 and P >= lowest whatever alpha and s (substitute z = y s: alpha and s fall out of the first)."""
    regulator = Exponential(alpha=alpha, s=s)
    rule = regulator.rule(4.0, derivatives=1, decay=3)
    P = rule.y + rule.s[0]
    assert (P >= rule.lowest * (1 - 1e-15)).all()
    value = np.sum(rule.weight * (2 * rule.s[0] - 2 * rule.y * rule.s[1]) / P**3)
    assert value == pytest.approx(1.0, rel=2e-12)


@pytest.mark.parametrize("regulator", [*REGULATORS, Sharp()], ids=label)
def test_regulators_are_values(regulator: AbstractRegulator) -> None:
    same = dataclasses.replace(regulator)  # type: ignore[type-var]
    assert same == regulator and hash(same) == hash(regulator)
    assert all(isinstance(v, float) for v in regulator.parameters.values())
    assert regulator.reference
    assert regulator.closed_form == (regulator.name == "sharp")


@pytest.mark.parametrize(
    ("make", "said"),
    [
        (lambda: Flat(alpha=0.0), "alpha = 0"), (lambda: Flat(alpha=math.nan), "alpha = nan"),
        (lambda: Theta(power=0.5), "power = 0.5"), (lambda: Theta(alpha=-1.0), "alpha = -1"),
        (lambda: Exponential(s=0.0), "s = 0"), (lambda: Exponential(alpha=math.inf), "alpha = inf"),
        (lambda: Gaussian(alpha=-2.0), "alpha = -2"), (lambda: Power(b=0.0), "b = 0"), (lambda: Power(alpha=0.0), "alpha = 0"),
        (lambda: Mass(alpha=-1.0), "alpha = -1"),
        (lambda: dataclasses.replace(BUMP, values=(("a", math.inf), ("b", 0.3))), "a = inf"),
    ],
)
def test_parameters_out_of_range_are_refused(make, said: str) -> None:  # type: ignore[no-untyped-def]
    with pytest.raises(InputError, match=said) as caught:
        make()
    assert caught.value.remedy


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("exp(-y) - 1/2", "not positive"), ("exp(y)", "does not fall"), ("1 + exp(-y)", "does not fall"),
        ("y^(-2)*exp(-y)", "grows without bound"), ("1/(1-y)^2", "(cannot be evaluated|not finite)"),
        ("log(y)*exp(-y)", "not positive"), ("sin(y)^2", "(not positive|does not fall)"),
        ("1/(y^2-9)^2", "(cannot be evaluated|not finite)"), ("1/(y-1)", "(not positive|cannot be evaluated)"),
    ],
)
def test_custom_shapes_that_are_no_regulators_are_refused(text: str, said: str) -> None:
    from frg.language.shapetext import parse_custom_shape

    with pytest.raises(InputError, match=said) as caught:
        Custom(expression=parse_custom_shape(text, []))
    assert caught.value.remedy


def test_custom_shapes_may_fall_below_the_smallest_double() -> None:
    y = sympy.Symbol("y")
    steep = Custom(expression=sympy.exp(-(y**2)))
    assert steep.rule(3.0).error < 2e-13
    assert LORENTZ.rule(3.0).error < 2e-13


def test_theta_of_power_one_is_flat() -> None:
    theta, flat = Theta(alpha=1.5).rule(3.0), Flat(alpha=1.5).rule(3.0)
    assert np.array_equal(theta.y, flat.y) and np.array_equal(theta.surface_s, flat.surface_s)
