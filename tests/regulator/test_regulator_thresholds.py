"""Threshold functions: universal values, closed forms, relations between them."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest

from frg.errors import InputError
from frg.regulator.base import AbstractRegulator
from frg.regulator.shapes import Exponential, Flat, Gaussian, Mass, Sharp
from frg.regulator.thresholds import threshold
from tests.regulator.cases import REGULATORS, label


@pytest.mark.parametrize("regulator", [*REGULATORS, Sharp()], ids=label)
@pytest.mark.parametrize("n", [1, 2, 3])
def test_universal_values(regulator: AbstractRegulator, n: int) -> None:
    """l_n^(2n)(0) = 1 for every regulator: the integrand is the total derivative of (y/P)^n (J. Berges, N. Tetradis,
    C. Wetterich, Phys. Rept. 363 (2002) 223)."""
    assert threshold(regulator, n, 0.0, 2.0 * n) == pytest.approx(1.0, rel=2e-12)


@pytest.mark.parametrize("dimension", [0.5, 1.0, 2.0, 2.5, 3.0, 3.99, 4.0, 6.0])
def test_flat_closed_form(dimension: float) -> None:
    """l_n^d(w; eta) = (2/d)(n + delta_n0)(1 - eta/(d+2))/(1+w)^(n+1) (D. Litim, Phys. Rev. D 64 (2001) 105007)."""
    for n in range(4):
        for w in (-0.9, 0.0, 2.0):
            for eta in (0.0, 0.3):
                closed = 2 / dimension * max(n, 1) * (1 - eta / (dimension + 2)) / (1 + w) ** (n + 1)
                assert threshold(Flat(), n, w, dimension, eta) == pytest.approx(closed, rel=1e-14)


def test_sharp_closed_form_and_limit_of_steep_shapes() -> None:
    """l_0(w) = -ln(1+w) up to a constant, l_n = (1+w)^-n (F. Wegner, A. Houghton, Phys. Rev. A 8 (1973) 401): the limit
    a -> infinity of s = a (1-y) below 1, whose l_n differ from it by O(ln a / a)."""
    for w in (-0.5, 0.0, 1.0, 7.0):
        assert threshold(Sharp(), 0, w, 3.0) == pytest.approx(-math.log(1 + w), rel=1e-15)
        for n in (1, 2):
            assert threshold(Sharp(), n, w, 3.0) == pytest.approx((1 + w) ** -n, rel=1e-15)
    for w in (0.5, 2.0):
        for n in (1, 2):
            off = [abs(threshold(Flat(alpha=a), n, w, 3.0) * (1 + w) ** n - 1) for a in (1e2, 1e3, 1e4)]
            assert off[1] < off[0] / 5 and off[2] < off[1] / 5 and off[2] < 2e-3
    with pytest.raises(InputError, match="no threshold functions with eta"):
        threshold(Sharp(), 1, 0.0, 3.0, eta=0.1)


def test_exponential_values_of_riemann_zeta_type() -> None:
    """Phi^p_n(w) = 1/Gamma(n) integral dz z^(n-1) (R - z R')/(z+R+w)^p, R = z/(e^z - 1): Phi^1_1(0) = pi^2/6,
    Phi^1_2(0) = 2 zeta(3), Phi^2_1(0) = 1 (M. Reuter, Phys. Rev. D 57 (1998) 971, from memory; the first two are
    integral dz z/(e^z - 1) and integral dz z^2/(e^z - 1), since (R - z R')/(z+R) = z/(e^z - 1)).
    l_(p-1)^(2n)(0) = max(p-1, 1) Gamma(n) Phi^p_n(0)."""
    zeta3 = float(mpmath.zeta(3))
    assert threshold(Exponential(), 0, 0.0, 2.0) == pytest.approx(math.pi**2 / 6, rel=1e-13)
    assert threshold(Exponential(), 0, 0.0, 4.0) == pytest.approx(2 * zeta3, rel=1e-13)
    assert threshold(Exponential(), 1, 0.0, 2.0) == pytest.approx(1.0, rel=1e-13)


@pytest.mark.parametrize("dimension", [1.0, 2.5, 3.0])
def test_mass_closed_form(dimension: float) -> None:
    """l_n^d(w) = n alpha B(d/2, n+1-d/2) (alpha+w)^(d/2-n-1), n >= 1, by the beta integral."""
    for alpha in (1.0, 2.5):
        for n in (1, 2):
            for w in (-0.9 * alpha, 0.0, 2.0):
                beta = math.gamma(dimension / 2) * math.gamma(n + 1 - dimension / 2) / math.gamma(n + 1)
                closed = n * alpha * beta * (alpha + w) ** (dimension / 2 - n - 1)
                assert threshold(Mass(alpha=alpha), n, w, dimension) == pytest.approx(closed, rel=2e-12)
    # l_0 up to its value at w = 0, in d = 3: -pi alpha [sqrt(alpha+w) - sqrt(alpha)]
    assert threshold(Mass(), 0, 3.0, 3.0) == pytest.approx(-math.pi, rel=1e-12)


@pytest.mark.parametrize("regulator", REGULATORS, ids=label)
def test_each_is_the_mass_derivative_of_the_one_before(regulator: AbstractRegulator) -> None:
    """l_(n+1) = -(1/(n + delta_n0)) d l_n/dw, by central differences of order h^4."""
    h = 2e-3
    for eta in (0.0, 0.4):
        for n in (0, 1):
            below, low, high, above = (threshold(regulator, n, 0.2 + k * h, 2.5, eta) for k in (-2, -1, 1, 2))
            slope = (below - 8 * low + 8 * high - above) / (12 * h)
            assert threshold(regulator, n + 1, 0.2, 2.5, eta) == pytest.approx(-slope / max(n, 1), rel=1e-7)


def test_masses_at_the_pole_and_negative_index_are_refused() -> None:
    for regulator, lowest in [(Flat(), 1.0), (Sharp(), 1.0), (Gaussian(alpha=0.25), 0.25)]:
        for w in (-lowest, -lowest - 1, np.nan):
            with pytest.raises(InputError, match="pole") as caught:
                threshold(regulator, 1, w, 3.0)
            assert f"w > {-lowest:g}" in caught.value.remedy
    with pytest.raises(InputError, match="l_-1"):
        threshold(Flat(), -1, 0.0, 3.0)
