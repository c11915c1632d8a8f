"""The second variation on the sphere against independent computations."""

from __future__ import annotations

import sympy

from frg.derive.sphere.hessian import (
    Geometry,
    curvature,
    delta,
    feynman_traces,
    gauge_vector,
    ghost_operators,
    landau_traces,
    whole_fields,
    york_hessian,
)

D, R = delta(), curvature()
d, F0, F1, F2, Z, L = sympy.symbols("d F0 F1 F2 Z Lambda")
GENERAL = Geometry(d=d, jets=(F0, F1, F2))
EINSTEIN_HILBERT = Geometry(d=d, jets=(Z * (2 * L - R), -Z, sympy.Integer(0)))


def zero(e: sympy.Expr) -> bool:
    return sympy.simplify(sympy.expand(e)) == 0


def test_the_trace_of_the_metric_against_conformal_rescaling() -> None:
    """For h_mn = g h/d, h = d x, the new metric is (1 + x) g exactly, and with omega = ln(1+x)/2
    R' = (1+x)^-1 [R - 2(d-1) D^2 omega - (d-1)(d-2)(D omega)^2] (R. Wald, General Relativity, 1984, appendix D). Expanded to
    second order under the integral, with x an eigenfunction of Delta."""
    first = -R + (d - 1) * D
    # x Delta x and (D x)^2 are equal under the integral, so that the second-order part of D^2 omega drops out
    second = R - (d - 1) * D - (d - 1) * (d - 2) / 4 * D
    quadratic = F0 * d / 2 * (d / 2 - 1) / 2 + F1 * (d / 2 * first + second) + F2 * first**2 / 2
    ours = york_hessian(GENERAL, exponential=False).scalar[1, 1] / 2
    assert zero(quadratic / d**2 - ours)


def test_the_constant_mode_of_the_exponential_split_is_a_rescaling_of_the_sphere() -> None:
    """g exp(x), x = h/d constant: V exp(d x/2) F(R exp(-x)), an elementary second derivative."""
    x, r = sympy.symbols("x r")
    F = F0 + F1 * (r - R) + F2 * (r - R) ** 2 / 2
    action = (sympy.exp(d * x / 2) * F).subs(r, R * sympy.exp(-x))
    second = action.diff(x, 2).subs(x, 0) / 2 / d**2
    assert zero(second - york_hessian(GENERAL, exponential=True).scalar[1, 1].subs(D, 0) / 2)


def test_pure_gauge_modes_drop_out_on_shell() -> None:
    """A diffeomorphism e_m = D_m e shifts (sigma, h) by (2e, -2 Delta e), and xi by the transverse part: where the equation
    of motion E = 0 holds, the quadratic action does not change."""
    on_shell = {F0: 2 * R * F1 / d}
    for exponential in (False, True):
        hessian = york_hessian(GENERAL, exponential=exponential)
        assert zero(hessian.vector.subs(on_shell))
        moved = (hessian.scalar * sympy.Matrix([2, -2 * D])).subs(on_shell)
        assert zero(moved[0]) and zero(moved[1])


def test_the_two_splits_agree_on_shell() -> None:
    linear, exponential = (york_hessian(GENERAL, exponential=e) for e in (False, True))
    difference = [linear.tensor - exponential.tensor, *(linear.scalar - exponential.scalar)]
    assert all(zero(e.subs(F0, 2 * R * F1 / d)) for e in difference)


def test_ghosts_are_the_gauge_condition_of_a_diffeomorphism() -> None:
    beta = sympy.Symbol("beta")
    v, a, b = gauge_vector(GENERAL, beta)
    transverse, longitudinal = ghost_operators(GENERAL, beta)
    assert zero(transverse - v)
    assert zero(longitudinal - ((d - 1 - beta) * D - R))
    assert zero(2 * a - 2 * D * b - 2 * longitudinal / d)


def test_einstein_hilbert_in_the_harmonic_gauge() -> None:
    """Curvature terms of the York components: A. Codello, R. Percacci, C. Rahmede, Ann. Phys. 324 (2009) 414,
    arXiv:0805.2909 (from memory): (d^2-3d+4)/(d(d-1)), (d-3)/d, (d-4)/d, (d-4)/d; ghosts -1/d, -2/d; masses -2 Lambda."""
    traces = {t.name: t for t in feynman_traces(EINSTEIN_HILBERT, sympy.Integer(1), d / 2 - 1, exponential=False)}
    expected = {
        "tensor": (d**2 - 3 * d + 4) / (d * (d - 1)), "vector": (d - 3) / d, "sigma": (d - 4) / d, "trace": (d - 4) / d,
    }
    for name, e in expected.items():
        assert not sympy.simplify(traces[name].operator / (D + e * R - 2 * L)).has(D, R, L)
    for name, e in {"vector ghost": -1 / d, "scalar ghost": -2 / d}.items():
        assert not sympy.simplify(traces[name].operator / (D + e * R)).has(D, R)
    # together again they are one operator on the traceless tensor, the trace, and the ghost vector
    assert [t.bundle.kind for t in whole_fields(list(traces.values()), EINSTEIN_HILBERT)] == [
        "traceless", "scalar", "full-vector",
    ]


def test_f_of_r_in_four_dimensions() -> None:
    """The two operators as in A. Codello, R. Percacci, C. Rahmede, Int. J. Mod. Phys. A 23 (2008) 143, arXiv:0705.1769 (from
    memory): f'(Delta - R/3) + f and 9f''(Delta - R/3)^2 + 3f' Delta - 2R f' + 2f."""
    geometry = Geometry(d=sympy.Integer(4), jets=(F0, F1, F2))
    traces = {t.name: t.operator for t in landau_traces(geometry, sympy.Integer(0), exponential=False)}
    tensor = F1 * (D - R / 3) + F0
    scalar = 9 * F2 * (D - R / 3) ** 2 + 3 * F1 * D - 2 * R * F1 + 2 * F0
    assert sympy.simplify(traces["tensor"] / tensor) == -sympy.Rational(1, 2)
    assert sympy.simplify(traces["scalar"] / scalar) == sympy.Rational(1, 16)


def test_the_physical_scalar_does_not_depend_on_beta_on_shell() -> None:
    """On shell only factors that gauge fixing brings in and the ghosts take away differ."""
    geometry = Geometry(d=sympy.Integer(4), jets=(R * F1 / 2, F1, F2))
    plain = landau_traces(geometry, sympy.Integer(0), exponential=False)[1].operator
    for beta in (1, sympy.Rational(1, 2), -1):
        with_beta = landau_traces(geometry, sympy.sympify(beta), exponential=False)[1].operator
        ratio = sympy.cancel(with_beta / plain)
        assert not ratio.has(F1, F2) and sympy.denom(ratio).is_number
