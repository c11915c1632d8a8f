"""Derived flows in flat space against published equations and independent evaluations of the one-loop trace."""

from __future__ import annotations

import numpy as np
import pytest
import sympy
from scipy.integrate import quad

from frg.derive import symbols
from frg.derive.flow import derive_flow
from frg.derive.printing import equations_latex, equations_text
from frg.errors import NotYet
from frg.language.reader import read_truncation
from frg.regulator.shapes import Exponential, Flat, Gaussian, Sharp
from tests.conftest import scalar


def u(k: int) -> sympy.Symbol:
    return symbols.jet("U", (k,))


def test_flat_local_potential_is_the_published_equation() -> None:
    # D. Litim, Nucl. Phys. B 631 (2002) 128, hep-th/0203006, with 4 v_d/d written out
    (flow,) = derive_flow(scalar(components="N"), Flat()).functions
    d, N, rho = sympy.symbols("d N rho")
    published = (
        -d * u(0) + (d - 2) * rho * u(1)
        + 4 * symbols.volume() / d * ((N - 1) / (1 + u(1)) + 1 / (1 + u(1) + 2 * rho * u(2)))
    )
    assert sympy.simplify(flow.rhs - published) == 0


def test_goldstone_anomalous_dimension_of_the_flat_shape_is_the_published_one() -> None:
    # J. Berges, N. Tetradis, C. Wetterich, Phys. Rept. 363 (2002) 223, with m_{2,2} = 1/(1 + 2 kappa lambda)^2 for
    # the flat shape: eta = 16 v_d/d kappa lambda^2/(1 + 2 kappa lambda)^2 (formula from memory)
    (eta,) = derive_flow(scalar(components="N", wave=True, overrides={"N": "2"}), Flat()).anomalous
    d, rho = sympy.symbols("d rho")
    at_minimum = eta.rhs.subs(u(1), 0)
    assert eta.mode == "goldstone"
    assert sympy.simplify(at_minimum - 16 * symbols.volume() / d * rho * u(2) ** 2 / (1 + 2 * rho * u(2)) ** 2) == 0


def test_sharp_potential_is_wegner_and_houghton() -> None:
    # F. Wegner, A. Houghton, Phys. Rev. A 8 (1973) 401: -2 v_d [ (N-1) ln(1+u') + ln(1+u'+2 rho u'') ]
    (flow,) = derive_flow(scalar(components="N"), Sharp()).functions
    N, rho = sympy.symbols("N rho")
    loop = flow.rhs.coeff(symbols.volume())
    expected = -2 * (N - 1) * sympy.log(1 + u(1)) - 2 * sympy.log(1 + u(1) + 2 * rho * u(2))
    assert sympy.simplify(loop - expected) == 0


@pytest.mark.parametrize("dimension", [2.5, 3.0, 4.0])
def test_loop_of_the_potential_is_the_momentum_integral(dimension: float) -> None:
    """(1/2) int d^dq/(2 pi)^d d_t R/(P + w) by adaptive quadrature of the defining integral: no source needed."""
    regulator = Exponential(alpha=1.7)
    from frg.evaluate.build import build_flow, flow_arguments
    from frg.evaluate.jaxload import load

    jnp = load().numpy
    truncation = scalar(about="0", overrides={"d": repr(dimension)})
    flow = build_flow(derive_flow(truncation, regulator), (2,))
    args = flow_arguments(flow)
    env = dict(args.parameters) | {"rho": 0.0, "U{0}": 0.0, "U{1}": 0.3, "U{2}": 0.0}
    (ours,) = flow._with_loops(flow.rhs, {k: jnp.asarray(v) for k, v in env.items()}, args.rule)

    def integrand(y: float) -> float:
        s = 1.7 * y / np.expm1(y) if y > 0 else 1.7
        slope = 1.7 * (np.expm1(y) - y * np.exp(y)) / np.expm1(y) ** 2 if y > 1e-4 else -0.85
        return y ** (dimension / 2 - 1) * (2 * s - 2 * y * slope) / (y + s + 0.3)

    value = quad(integrand, 0, 60, epsabs=0, epsrel=1e-11, limit=400)[0]
    assert float(ours) == pytest.approx(args.parameters["vd"] * value, rel=1e-9)


def test_bubble_slope_is_the_momentum_derivative_of_the_bubble() -> None:
    """The p^2 coefficient of int_q d_t R(q) G_a(q)^2 G_b(q+p), d = 3, from the integral at finite p (angle done in
    closed form by Gauss-Legendre, radius adaptively), against the loop integral the derivation uses."""
    from numpy.polynomial.legendre import leggauss

    from frg.derive.flat.wavefunction import bubble_slope
    from frg.derive.loops import LoopBook
    from frg.evaluate.build import build_flow, flow_arguments
    from frg.evaluate.flow import integrate
    from frg.language.program import compile_expressions

    a, b, regulator = 0.4, 0.1, Gaussian(alpha=1.3)
    book = LoopBook(regulator, sympy.Integer(3), close=False, dimension_value=3.0)
    bubble_slope(book, sympy.Float(a), sympy.Float(b), sympy.Integer(0))
    flow = build_flow(derive_flow(scalar(wave=True), regulator), (2,))
    rule = flow_arguments(flow).rule
    ours = float(integrate(compile_expressions([book.loops[0].integrand]), {}, rule, surface=True, subtract=False))

    angles, weights = leggauss(40)

    def P(y: np.ndarray) -> np.ndarray:
        return y + 1.3 * np.exp(-y)

    def bubble(p: float) -> float:
        def radial(q: float) -> float:
            y = q * q
            insertion = 1.3 * np.exp(-y) * (2 + 2 * y)
            other = y + 2 * q * p * angles + p * p
            return 2 * q * q * insertion / (P(y) + a) ** 2 * float(weights @ (1 / (P(other) + b))) / 2
        return quad(radial, 0, 7, epsabs=0, epsrel=1e-13, limit=400)[0]

    h = 0.04
    zero, one, two = bubble(0.0), bubble(h), bubble(2 * h)
    slope = (16 * (one - zero) / h**2 - (two - zero) / h**2) / 12  # p^2 coefficient, p^4 eliminated
    assert ours == pytest.approx(slope, rel=2e-5)


def test_one_component_of_the_multiplet_is_the_single_scalar() -> None:
    single = derive_flow(scalar(), Exponential()).functions[0]
    many = derive_flow(scalar(components="N"), Exponential())
    (loop,) = many.loops
    own = derive_flow(scalar(), Exponential()).loops[0]
    assert sympy.simplify(loop.integrand.subs(sympy.Symbol("N"), 1) - own.integrand) == 0
    assert single.rhs == many.functions[0].rhs


def test_radial_mode_is_used_for_one_component_and_can_be_asked_for() -> None:
    assert derive_flow(scalar(wave=True), Flat()).anomalous[0].mode == "radial"
    # the number of components in force decides, not how it was written
    assert derive_flow(scalar(components="N", wave=True), Flat()).anomalous[0].mode == "radial"
    two = scalar(components="N", wave=True, overrides={"N": "2"})
    assert derive_flow(two, Flat()).anomalous[0].mode == "goldstone"


def test_odd_sector_has_its_exact_constant_and_redundant_directions() -> None:
    """h = 1 gives -(d+2)/2 exactly, for any background."""
    odd = derive_flow(scalar(), Exponential()).odd
    assert odd is not None
    h = [symbols.jet(odd.name, (k,)) for k in range(3)]
    constant = odd.rhs.subs({h[0]: 1, h[1]: 0, h[2]: 0})
    assert sympy.expand(constant + (sympy.Symbol("d") + 2) / 2) == 0


def test_three_fields_reduce_to_three_copies_without_their_coupling(shelf) -> None:
    """Decoupled potentials: the trace over three mixing modes is the sum over single modes."""
    equations = derive_flow(read_truncation(shelf / "cubic_three_fields.toml"), Flat())
    potential = equations.potential
    assert potential is not None
    x = [sympy.Symbol(c) for c in potential.coordinates]
    values = {}
    for orders in potential.jets:
        if sum(orders) > 0 and max(orders) < sum(orders):
            values[symbols.jet(potential.name, orders)] = 0
    ours = potential.rhs.subs(values)
    total = 0
    for i, xi in enumerate(x):
        first = symbols.jet(potential.name, tuple(int(j == i) for j in range(3)))
        second = symbols.jet(potential.name, tuple(2 * int(j == i) for j in range(3)))
        total += 1 / (1 + first + 2 * xi * second)
    d = sympy.Symbol("d")
    canonical = -d * symbols.jet(potential.name, (0, 0, 0)) + sum(
        (d - 2) * xi * symbols.jet(potential.name, tuple(int(j == i) for j in range(3))) for i, xi in enumerate(x)
    )
    assert sympy.simplify(ours - canonical - 4 * symbols.volume() / d * total) == 0


def test_mixed_potentials_and_sharp_wave_functions_are_refused() -> None:
    with pytest.raises(NotYet):
        derive_flow(scalar(components="N", wave=True), Sharp())


def test_equations_print_in_the_names_of_the_file() -> None:
    text = equations_text(derive_flow(scalar(components="N", wave=True), Flat()))
    assert text.startswith("d_t U(rho) = -U*d + U'*rho*(d + eta_Z - 2)")
    latex = equations_latex(derive_flow(scalar(components="N", wave=True), Exponential()))
    assert r"\partial_t U(\rho)" in latex and r"\int_0^\infty" in latex
    assert latex.count("{") == latex.count("}")
