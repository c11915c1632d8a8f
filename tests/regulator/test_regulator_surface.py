"""The surface term of the flat shape against limits in which no kink, or no derivative, occurs."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from scipy.integrate import quad

from frg.regulator.shapes import Flat
from tests.regulator.cases import integral


def slope_integrand(wa: float, wb: float):  # type: ignore[no-untyped-def]
    """y d/dy[d_t R G_a^2] G_b', eta = 0: with the rule's weight this is integral dy y^(d/2) d/dy[d_t R G_a^2] G_b'."""

    def integrand(y, s, s1, s2):  # type: ignore[no-untyped-def]
        Ga, Gb = 1 / (y + s + wa), 1 / (y + s + wb)
        insertion, insertion_slope = 2 * s - 2 * y * s1, -2 * y * s2
        return y * (insertion_slope * Ga**2 - 2 * insertion * (1 + s1) * Ga**3) * -(1 + s1) * Gb**2

    return integrand


def smoothed(alpha: float, width: float, wa: float, wb: float, dimension: float) -> float:
    """The same integral for s = alpha width ln(1 + exp((1-y)/width)), which has no kink."""

    def integrand(y: float) -> float:
        x = (1 - y) / width
        s = alpha * width * float(np.logaddexp(0.0, x))
        fermi = 1 / (1 + float(np.exp(-x)))
        s1, s2 = -alpha * fermi, alpha / width * fermi * (1 - fermi)
        return y ** (dimension / 2 - 1) * slope_integrand(wa, wb)(y, s, s1, s2)

    marks = [0.0, 1 - 12 * width, 1 - 3 * width, 1.0, 1 + 3 * width, 1 + 12 * width, 1 + 40 * width]
    parts = [quad(integrand, a, b, epsabs=1e-13, epsrel=1e-12)[0] for a, b in zip(marks[:-1], marks[1:], strict=True)]
    return sum(parts)


def extrapolated(steps: list[float], values: list[float]) -> float:
    """Value at step 0 of the interpolating polynomial."""
    return float(sum(
        v * np.prod([x / (x - s) for x in steps if x != s]) for s, v in zip(steps, values, strict=True)
    ))


@pytest.mark.parametrize(("alpha", "wa", "wb", "dimension"), [
    (1.0, 0.0, 0.0, 3.0), (1.0, -0.3, 0.8, 3.0), (1.0, 0.5, -0.4, 2.5), (0.6, 0.2, 0.1, 3.0), (1.6, -0.3, 0.5, 4.0),
])  # fmt: skip
def test_surface_term_is_the_limit_of_smooth_shapes(alpha: float, wa: float, wb: float, dimension: float) -> None:
    widths = [0.02, 0.016, 0.012, 0.008, 0.004]
    limit = extrapolated(widths, [smoothed(alpha, width, wa, wb, dimension) for width in widths])
    rule = Flat(alpha=alpha).rule(dimension)
    value = integral(rule, slope_integrand(wa, wb))
    assert value == pytest.approx(limit, rel=1e-6)
    # without the surface term, or with s' of one side only, it is another number
    bare = float(rule.weight @ slope_integrand(wa, wb)(rule.y, *rule.s))
    one_sided = bare + 2 * (value - bare)
    assert abs(bare - limit) > 0.05 * abs(limit) and abs(one_sided - limit) > 0.05 * abs(limit)


@pytest.mark.parametrize(("wa", "wb"), [(0.0, 0.0), (-0.3, 0.8)])
def test_surface_term_is_the_slope_of_the_bubble_at_finite_momentum(wa: float, wb: float) -> None:
    """B(p) = integral dy y^(1/2) d_t R G_a(q)^2 <G_b(|q+p|)>, d = 3, alpha = 1: no derivative of s occurs.

    Inside y < 1 d_t R = 2, P = 1, and the angular average of G_b = 1/(max(1, y') + w) is elementary:
    1/(1+w) for q < 1-p, else [(1 - (q-p)^2)/(1+w) + ln(((q+p)^2 + w)/(1+w))]/(4 q p). The coefficient of p^2 of B is
    -(2/d) integral dy y^(d/2) d/dy[d_t R G_a^2] G_b' (partial integration of G_b' + (2y/d) G_b'')."""

    def quotient(p: float) -> mpmath.mpf:
        p = mpmath.mpf(p)

        def shell(q):  # type: ignore[no-untyped-def]
            average = ((1 - (q - p) ** 2) / (1 + wb) + mpmath.log(((q + p) ** 2 + wb) / (1 + wb))) / (4 * q * p)
            return 2 * q**2 * 2 / mpmath.mpf(1 + wa) ** 2 * (average - 1 / mpmath.mpf(1 + wb))

        return mpmath.quad(shell, [1 - p, 1]) / p**2

    with mpmath.workdps(30):
        steps = [0.16, 0.12, 0.08, 0.06, 0.04, 0.02]
        slope = extrapolated(steps, [float(quotient(p)) for p in steps])
    value = -2 / 3 * integral(Flat().rule(3.0), slope_integrand(wa, wb))
    assert value == pytest.approx(slope, rel=1e-7)
    assert value == pytest.approx(-2 / 3 / ((1 + wa) * (1 + wb)) ** 2, rel=1e-14)


def test_surface_term_of_the_contract() -> None:
    rule = Flat(alpha=1.7).rule(3.0)
    assert rule.surface_y.tolist() == [1.0] and rule.surface_weight.tolist() == [1.0]
    assert rule.surface_s[:, 0].tolist() == [0.0, -0.85, 1.7]
    assert Flat().rule(3.0, derivatives=1).surface_y.size == 0
