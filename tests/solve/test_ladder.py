"""The ladder finds every real root of a truncated potential, shown by exact rational arithmetic."""

from __future__ import annotations

from fractions import Fraction

import flint
import numpy as np
import pytest
import sympy

from frg.cli.settings import search_settings
from frg.derive.flow import derive_flow
from frg.evaluate.build import build_flow, flow_arguments
from frg.evaluate.exact import ExactSeries, exact_arithmetic, rational, series_environment
from frg.language.program import compile_expressions
from frg.regulator.shapes import Flat
from frg.solve.ladder import Ladder, LadderScan, has_ladder
from frg.solve.search import PolynomialSearch, Warm
from tests.conftest import scalar

VD = Fraction(1, 12)  # any rational value: rescaling v_d rescales the couplings, and leaves u'(0) alone


def exact_last_row(order: int, dimension: Fraction):
    """sigma -> the last row of the fixed-point equations, exactly, with all other rows solved upwards."""
    (flow,) = derive_flow(scalar(about="0"), Flat()).functions
    program = compile_expressions([flow.rhs.subs(sympy.Symbol("d"), sympy.Rational(dimension))])
    length = order + 1

    def row(coefficients: list, k: int):
        series = ExactSeries.of(coefficients)
        env = dict(series_environment("U", series, 2))
        env["rho"] = ExactSeries.of([0, 1] + [0] * (length - 2))
        env["vd"] = rational(VD)
        return program.run(env, exact_arithmetic())[0].coefficients[k]

    def last(sigma: Fraction):
        c = [0, sigma] + [0] * (length - 2)
        for k in range(1, order):
            off = row(c, k)
            c[k + 1] = 1
            on = row(c, k)
            c[k + 1] = -off / (on - off)
        return row(c, order)

    return last


def exact_roots(order: int, dimension: Fraction, low: float, high: float) -> list[float]:
    """All real roots in (low, high) of the last row, which is a polynomial in sigma over a power of 1 + sigma: the
    numerator by interpolation at more points than its degree, its roots isolated rigorously by flint."""
    last = exact_last_row(order, dimension)
    count = 2 * order + 6
    nodes = [Fraction(k, count) for k in range(1, count + 1)]
    for power in range(0, order + 2):
        values = [last(s) * rational((1 + s) ** power) for s in nodes]
        polynomial = interpolate(nodes, values)
        if polynomial.degree() < count - 3:  # reproduced by fewer points than were used: it is the polynomial
            break
    else:
        raise AssertionError("the last row is not a rational function of the expected form")
    numerator = polynomial.numer()
    roots = [complex(r) for r, _ in numerator.complex_roots()]
    real = {round(r.real, 13) for r in roots if abs(r.imag) < 1e-40 or r.imag == 0}
    return sorted(r for r in real if low < r < high)


def interpolate(nodes: list[Fraction], values: list) -> flint.fmpq_poly:
    total = flint.fmpq_poly([0])
    for i, xi in enumerate(nodes):
        basis = flint.fmpq_poly([values[i]])
        for j, xj in enumerate(nodes):
            if i != j:
                basis *= flint.fmpq_poly([-rational(xj), 1]) / rational(xi - xj)
        total += basis
    return total


@pytest.mark.parametrize("order, dimension", [(2, Fraction(3)), (4, Fraction(3)), (6, Fraction(3)), (8, Fraction(3)),
                                              (6, Fraction(5, 2))])
def test_every_real_root_is_found(order: int, dimension: Fraction) -> None:
    truncation = scalar(about="0", overrides={"d": str(dimension)})
    flow = build_flow(derive_flow(truncation, Flat()), (order,))
    args = flow_arguments(flow)
    assert has_ladder(flow)
    unit = float(np.asarray(args.scale)[0])
    scan = LadderScan(low=-0.9995 / unit, high=2.0 / unit, points=1536, halvings=44)
    roots = Ladder(flow=flow).roots(order, args, scan)[:, 0] * unit
    expected = exact_roots(order, dimension, -0.9995, 2.0)
    assert len(roots) == len(expected)
    assert roots == pytest.approx(expected, abs=1e-9)


def test_rows_of_a_ladder_root_vanish_when_measured_again() -> None:
    search = PolynomialSearch(
        equations=derive_flow(scalar(about="0"), Flat()), orders=(2, 3, 4, 5, 6), settings=search_settings(thorough=False)
    )
    points, counts, _ = search.find(6, Warm())
    assert counts["fixed points"] == len(points) >= 2
    assert all(p.residual < 1e-9 for p in points)
    assert points[0].gaussian


def test_order_two_is_exact() -> None:
    """n = 2 about zero, N = 1, d = 3: sigma = -1/13 by hand from -2 s + A (-3 l)/(1+s)^2 = 0, -l + 9 A l^2 ... = 0."""
    assert exact_roots(2, Fraction(3), -0.9, 2.0) == pytest.approx([-1 / 13, 0], abs=1e-12)
