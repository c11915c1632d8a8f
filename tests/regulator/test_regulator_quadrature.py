"""Loop rules against adaptive quadrature of the defining integrals with mpmath, and refusals."""

from __future__ import annotations

import math
from collections.abc import Callable

import mpmath
import numpy as np
import pytest

from frg.errors import InputError
from frg.regulator.base import AbstractRegulator, LoopRule
from frg.regulator.quadrature import gauss
from frg.regulator.shapes import Exponential, Flat, Gaussian, Mass, Power, Sharp, Theta
from tests.regulator.cases import REGULATORS, SHAPES, integral, label


def by_mpmath(written: Callable, support: float, integrand: Callable, dimension: float, dip: float) -> float:
    """integral dy y^(d/2-1) integrand(y, s, s') by tanh-sinh quadrature, s' by differentiation of `written`.

    y = x^4 up to 1 and y = x^-4 beyond take the singular powers at 0 and infinity off."""
    with mpmath.workdps(25):

        def loop(y):  # type: ignore[no-untyped-def]
            with mpmath.workdps(45):
                slope = mpmath.re(mpmath.diff(written, y, h=y * mpmath.mpf(10) ** -12))
            return y ** (mpmath.mpf(dimension) / 2 - 1) * integrand(y, written(y), slope)

        def below(x):  # type: ignore[no-untyped-def]
            return 4 * x**3 * loop(x**4)

        def beyond(x):  # type: ignore[no-untyped-def]
            return 4 * x**-5 * loop(x**-4)

        total = mpmath.quad(below, sorted({mpmath.mpf(0), min(dip, 1) ** mpmath.mpf(0.25), mpmath.mpf(1)}))
        if math.isinf(support):
            total += mpmath.quad(beyond, sorted({mpmath.mpf(0), max(dip, 1) ** mpmath.mpf(-0.25), mpmath.mpf(1)}))
        return float(total)


def dip_of(rule: LoopRule) -> float:
    """Roughly where P is least."""
    return float(rule.y[np.argmin(rule.y + rule.s[0])])


def power_of_propagator(w: float, k: int) -> Callable:
    return lambda y, s, slope, *rest: (2 * s - 2 * y * slope) / (y + s + w) ** k


@pytest.mark.parametrize("case", SHAPES, ids=label)
@pytest.mark.parametrize("dimension", [2.5, 3.0])
def test_loops_agree_with_adaptive_quadrature(case: tuple, dimension: float) -> None:
    regulator, written = case
    rule = regulator.rule(dimension)
    least = 2 if rule.subtract else 1
    dip = dip_of(rule)
    for w, k in [(-0.9, 3), (-0.5, least), (0.0, 2), (3.0, least)]:
        integrand = power_of_propagator(w * rule.lowest, k)
        expected = by_mpmath(written, regulator.support, integrand, dimension, dip)
        assert integral(rule, integrand) == pytest.approx(expected, rel=2 * rule.error + 3e-15)


@pytest.mark.parametrize("dimension", [0.7, 1.0, 2.0, 3.99, 4.0, 6.0])
def test_loops_in_many_dimensions(dimension: float) -> None:
    chosen = [c for c in SHAPES if label(c) in ("flat-alpha0.5", "exponential-alpha1-s1", "theta-alpha1-power3")]
    assert len(chosen) == 3
    for regulator, written in chosen:
        rule = regulator.rule(dimension)
        integrand = power_of_propagator(-0.5 * rule.lowest, 2)
        expected = by_mpmath(written, regulator.support, integrand, dimension, 0.5)
        assert integral(rule, integrand) == pytest.approx(expected, rel=2 * rule.error + 3e-15)


@pytest.mark.parametrize("regulator", REGULATORS, ids=label)
@pytest.mark.parametrize("dimension", [1.0, 3.0, 3.99])
def test_rules_are_accurate_small_and_positive(regulator: AbstractRegulator, dimension: float) -> None:
    rule = regulator.rule(dimension)
    # y^(-1.005), all that is left of mass in d = 3.99, holds most of its integral at immense y
    assert rule.error < (5e-12 if regulator.name == "mass" and dimension == 3.99 else 5e-13)
    # every node costs in the compiled flow; regulators that are singular somewhere may need a few more than 64
    assert len(rule.y) <= (72 if regulator.name == "power" else 64)
    assert rule.s.shape == (3, len(rule.y)) and rule.surface_s.shape == (3, len(rule.surface_y))
    assert (rule.y > 0).all() and (rule.weight > 0).all()
    coarse = regulator.rule(dimension, accuracy=1e-4)
    assert coarse.error < 1e-4
    assert len(coarse.y) <= len(rule.y) / 2 or regulator == Flat()


@pytest.mark.parametrize("regulator", REGULATORS, ids=label)
def test_error_is_that_against_a_rule_of_higher_order(regulator: AbstractRegulator) -> None:
    """The stated error of a coarse rule bounds, and is not far above, its worst deviation on d_t R/(P+w)^k."""
    coarse, fine = regulator.rule(3.0, derivatives=1, accuracy=1e-4), regulator.rule(3.0, derivatives=1)
    least = 2 if coarse.subtract else 1
    worst = 0.0
    for w in (-0.9, -0.5, 0.0, 1.0, 10.0):
        for k in range(least, least + 3):
            integrand = power_of_propagator(w * coarse.lowest, k)
            exact = integral(fine, integrand)
            worst = max(worst, abs(integral(coarse, integrand) - exact) / abs(exact))
    assert worst <= coarse.error * (1 + 1e-6) + 1e-12
    assert worst > coarse.error / 1000 or regulator == Flat()


@pytest.mark.parametrize("regulator", REGULATORS, ids=label)
def test_derivatives_of_s_are_integrated_too(regulator: AbstractRegulator) -> None:
    """integral dy y^(d/2) d/dy f = -(d/2) integral dy y^(d/2-1) f with f = s' G^3 (1 + y): by parts, s'' on the left.

    The flat shape's s'' has a delta at the edge; there f jumps, and the surface term carries the jump of s'."""
    d = 3.0
    rule = regulator.rule(d, decay=2)

    def f(y, s, s1, s2):  # type: ignore[no-untyped-def]
        return s * s1 / (y + s + 0.3) ** 3

    def slope(y, s, s1, s2):  # type: ignore[no-untyped-def]
        G = 1 / (y + s + 0.3)
        return (s1**2 + s * s2) * G**3 - 3 * s * s1 * (1 + s1) * G**4

    left = integral(rule, lambda y, s, s1, s2: y * slope(y, s, s1, s2))
    right = -d / 2 * integral(rule, f)
    size = integral(rule, lambda y, s, s1, s2: y * abs(s1**2) / (y + s + 0.3) ** 3)
    assert left == pytest.approx(right, abs=2e-12 * max(size, abs(right)))


@pytest.mark.parametrize(("dimension", "masses", "tolerance"),
    [(1.0, [-0.5, 4.0], 3e-12), (3.0, [-0.9, -0.3, 2.0, 20.0], 3e-12), (2.5, [1.0], 3e-12), (3.9, [1.0], 1e-11)],
)
def test_mass_regulator_up_to_a_constant(dimension: float, masses: list[float], tolerance: float) -> None:
    """alpha = 1: integral dy y^(d/2-1) [2/(1+y+w) - 2/(1+y)] = 2 pi/sin(pi d/2) [(1+w)^(d/2-1) - 1] for 0 < d < 4, by the
    beta integral; in d = 3: -2 pi [sqrt(1+w) - 1]. The difference is taken node by node, as the compiled flow does, which
    costs digits at large y."""
    rule = Mass().rule(dimension)
    assert rule.subtract == (dimension >= 2)
    for w in masses:
        difference = power_of_propagator(w, 1)
        values = difference(rule.y, *rule.s) - power_of_propagator(0.0, 1)(rule.y, *rule.s)
        exact = 2 * math.pi / math.sin(math.pi * dimension / 2) * ((1 + w) ** (dimension / 2 - 1) - 1)
        assert rule.weight @ values == pytest.approx(exact, rel=tolerance)


def test_divergent_loops_are_refused() -> None:
    for regulator, dimension, decay in [
        (Mass(), 4.0, 1), (Mass(), 6.0, 2), (Power(b=1.0), 6.0, 1), (Power(b=0.5), 5.0, 1), (Power(b=0.5), 5.0, 2),
    ]:
        with pytest.raises(InputError, match="diverges") as caught:
            regulator.rule(dimension, decay=decay)
        assert caught.value.remedy
    assert not Power(b=1.0).rule(3.9).subtract
    assert Power(b=1.0).rule(4.5).subtract  # y^(d/2-1) y^-2 alone diverges, one more power of the propagator saves it
    assert not Mass().rule(4.0, decay=3).subtract
    for regulator in (Flat(), Gaussian(), Mass()):
        for dimension in (0.0, -1.0, math.nan, math.inf):
            with pytest.raises(InputError, match="positive dimension"):
                regulator.rule(dimension)


def test_shapes_that_are_not_smooth_enough_are_refused() -> None:
    for regulator, derivatives in [(Flat(), 3), (Flat(alpha=0.5), 4), (Theta(power=2.0), 4), (Theta(power=1.5), 3)]:
        with pytest.raises(InputError, match="derivatives") as caught:
            regulator.rule(3.0, derivatives=derivatives)
        assert caught.value.remedy
    assert Theta(power=3.0).rule(3.0, derivatives=4).s.shape[0] == 5
    assert Exponential().rule(3.0, derivatives=6).s.shape[0] == 7


def test_sharp_cutoff_has_no_rule() -> None:
    with pytest.raises(InputError, match="closed forms") as caught:
        Sharp().rule(3.0)
    assert "wave-function" in caught.value.remedy
    with pytest.raises(InputError, match="no shape"):
        Sharp().shape()


def test_flat_rule_is_exact_for_cubic_polynomials() -> None:
    """integral_0^1 dy y^(d/2-1) y^k = 1/(d/2 + k)."""
    for dimension in (0.5, 1.0, 2.5, 3.0, 4.0, 6.0):
        rule = Flat().rule(dimension)
        assert len(rule.y) == 2
        for k in range(4):
            assert rule.weight @ rule.y**k == pytest.approx(1 / (dimension / 2 + k), rel=1e-14)


def test_gauss_rule_of_a_discrete_measure() -> None:
    """A 64-point Gauss-Legendre rule taken for the measure gives back Gauss-Legendre rules of lower order."""
    z, mass = np.polynomial.legendre.leggauss(64)
    for count in (1, 2, 7, 20):
        nodes, weights = gauss(z, mass, count)
        expected_nodes, expected_weights = np.polynomial.legendre.leggauss(count)
        assert np.allclose(nodes, expected_nodes, rtol=0, atol=1e-14)
        assert np.allclose(weights, expected_weights, rtol=0, atol=1e-14)
