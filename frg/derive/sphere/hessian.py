"""Second variation of integral sqrt(g) F(R) on the sphere S^d, gauge fixing, ghosts: which operator every mode family has.

h_mn = hT_mn + D_m xi_n + D_n xi_m + (D_m D_n - g D^2/d) sigma + g h/d (J. York, J. Math. Phys. 14 (1973) 456). With the
canonical fields sqrt(Delta - R/d) xi and sqrt(Delta (Delta - R/(d-1))) sigma all Jacobians of this change of
variables are trivial. For the linear split g + h, with s = h + Delta sigma and E = F - 2 R F'/d,

  Gamma_quad = integral sqrt(g) { -1/4 F' hT [Delta + 2R/(d(d-1))] hT
      + (d-1)/(4d) s [2(d-1)/d F'' (Delta - R/(d-1)) + (d-2)/d F'] (Delta - R/(d-1)) s + E [h^2/8 - h_mn h^mn/4] }

(A. Codello, R. Percacci, C. Rahmede, Ann. Phys. 324 (2009) 414, arXiv:0805.2909; P. Machado, F. Saueressig, Phys.
Rev. D 77 (2008) 124045, arXiv:0712.0445). On modes that are pure gauge the action varies through the equation of
motion E only, which is why another parametrisation of the metric changes the last bracket alone: for the
exponential split g exp(g^-1 h) it is E h^2/8, the second variation of sqrt(g).

Operators are polynomials in the Laplacian `delta()`, with coefficients in R, the couplings and F^(j) = `jets`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from frg.derive.sphere.spectra import Bundle
from frg.errors import NotYet

if TYPE_CHECKING:
    import sympy


def delta() -> sympy.Symbol:
    """Delta = -nabla^2 inside an operator."""
    import sympy

    return sympy.Symbol("Delta{}")


def curvature() -> sympy.Symbol:
    """The curvature scalar R; dimensionless (in units of k^2) in flow equations."""
    import sympy

    return sympy.Symbol("R")


@dataclass(frozen=True, kw_only=True)
class Geometry:
    """Dimension (expression), and the action's derivatives F, F', F'' by R as expressions or symbols."""

    d: sympy.Expr
    jets: tuple[sympy.Expr, sympy.Expr, sympy.Expr]

    @property
    def equation_of_motion(self) -> sympy.Expr:
        return self.jets[0] - 2 * curvature() * self.jets[1] / self.d


@dataclass(frozen=True, kw_only=True)
class Trace:
    """`sign` * Tr ln(operator) over the modes of a bundle in Gamma_k; `name` says whose. `operator` is a
    polynomial in `delta()`; constant factors do not matter, factors that run do."""

    name: str
    sign: sympy.Expr
    bundle: Bundle
    operator: sympy.Expr


@dataclass(frozen=True, kw_only=True)
class Hessian:
    """Gamma_quad = 1/2 integral (hT tensor hT + xi vector xi + (sigma, h) scalar (sigma, h)), polynomials in `delta()`;
    xi and sigma are the plain fields, not the canonical ones."""

    tensor: sympy.Expr
    vector: sympy.Expr
    scalar: sympy.Matrix


def york_hessian(geometry: Geometry, *, exponential: bool) -> Hessian:
    """The second variation without gauge fixing, as quoted at the head of this module."""
    import sympy

    d, D, R = geometry.d, delta(), curvature()
    _, F1, F2 = geometry.jets
    E = geometry.equation_of_motion
    box = D - R / (d - 1)
    invariant = (d - 1) / (2 * d) * (2 * (d - 1) / d * F2 * box + (d - 2) / d * F1) * box
    scalar = invariant * sympy.Matrix([[D**2, D], [D, 1]])
    scalar[1, 1] += E / 4
    tensor, vector = -F1 / 2 * (D + 2 * R / (d * (d - 1))), sympy.Integer(0)
    if not exponential:
        tensor -= E / 2
        vector -= E * (D - R / d)
        scalar -= E / 2 * sympy.diag((d - 1) / d * D * box, 1 / d)
    return Hessian(tensor=tensor, vector=vector, scalar=scalar)


def gauge_vector(geometry: Geometry, beta: sympy.Expr) -> tuple[sympy.Expr, sympy.Expr, sympy.Expr]:
    """F_m = D^n h_mn - (1 + beta)/d D_m h = -v xi_m - D_m (a sigma + b h): (v, a, b)."""
    d, D, R = geometry.d, delta(), curvature()
    return D - R / d, (d - 1) / d * (D - R / (d - 1)), beta / d


def ghost_operators(geometry: Geometry, beta: sympy.Expr) -> tuple[sympy.Expr, sympy.Expr]:
    """(transverse, longitudinal): F_m of a diffeomorphism e_m shifts xi by e_m; for e_m = D_m e it shifts sigma by 2e
    and h by -2 Delta e."""
    import sympy

    v, a, b = gauge_vector(geometry, beta)
    return v, sympy.expand(geometry.d * (a - b * delta()))


def landau_traces(geometry: Geometry, beta: sympy.Expr, *, exponential: bool) -> list[Trace]:
    """Gauge parameter alpha to 0: F_m = 0 holds strictly.

    xi = 0, and a sigma + b h = 0 is solved by (sigma, h) = (-b, a) chi, divided by a where b = 0 (then chi = h). In canonical
    fields the delta functions leave det(Delta - R/d)^(-1/2) of the vector and det(Delta - R/(d-1))^(1/2) of the
    scalar, times 1/a where it was divided out; the ghosts their operators."""
    import sympy

    half = sympy.Rational(1, 2)
    hessian = york_hessian(geometry, exponential=exponential)
    v, a, b = gauge_vector(geometry, beta)
    transverse, longitudinal = ghost_operators(geometry, beta)
    box = sympy.expand(geometry.d * a / (geometry.d - 1))
    direction = sympy.Matrix([0, 1]) if b == 0 else sympy.Matrix([-b, a])
    physical = (direction.T * hessian.scalar * direction)[0, 0]
    found = [
        Trace(name="tensor", sign=half, bundle=Bundle(kind="tensor"), operator=hessian.tensor),
        # h has all scalar modes; chi lacks those on which sigma vanishes
        Trace(name="scalar", sign=half, bundle=Bundle(kind="scalar", excluded=0 if b == 0 else 2), operator=physical),
        Trace(name="vector ghost", sign=half - 1, bundle=Bundle(kind="vector", excluded=1), operator=transverse),
    ]
    scalars = Bundle(kind="scalar", excluded=2)
    if b == 0:
        return [*found, Trace(name="scalar ghost", sign=-half, bundle=scalars, operator=box)]
    return [
        *found,
        Trace(name="scalar ghost", sign=sympy.Integer(-1), bundle=scalars, operator=longitudinal),
        Trace(name="gauge condition", sign=-half, bundle=scalars, operator=box),
    ]


def feynman_traces(geometry: Geometry, alpha: sympy.Expr, beta: sympy.Expr, *, exponential: bool) -> list[Trace]:
    """Gauge-fixing term -F'/(2 alpha) integral F_m F^m, for an action linear in R (F'' = 0), where the fields decouple:
    the harmonic gauge alpha = 1, beta = d/2 - 1. Canonical fields; raises NotYet where sigma and h still mix."""
    import sympy

    half, (_, F1, F2) = sympy.Rational(1, 2), geometry.jets
    if F2 != 0:
        raise NotYet(
            "a finite gauge parameter with an action that is not linear in R", remedy="use gauge = { alpha = 0, beta = 0 }"
        )
    D, R, d = delta(), curvature(), geometry.d
    hessian = york_hessian(geometry, exponential=exponential)
    v, a, b = gauge_vector(geometry, beta)
    transverse, longitudinal = ghost_operators(geometry, beta)
    strength = -F1 / alpha
    vector = hessian.vector + strength * v**2
    scalar = hessian.scalar + strength * sympy.Matrix([[a * D * a, a * D * b], [b * D * a, b * D * b]])
    if sympy.simplify(scalar[0, 1]) != 0:
        raise NotYet(
            "a finite gauge parameter in which sigma and h mix",
            remedy='use gauge = "harmonic", or gauge = { alpha = 0, beta = 0 }',
        )
    canonical = {"xi": D - R / d, "sigma": D * (D - R / (d - 1))}
    parts = [
        ("tensor", half, Bundle(kind="tensor"), hessian.tensor),
        ("vector", half, Bundle(kind="vector", excluded=1), _quotient(vector, canonical["xi"])),
        ("sigma", half, Bundle(kind="scalar", excluded=2), _quotient(scalar[0, 0], canonical["sigma"])),
        ("trace", half, Bundle(kind="scalar"), scalar[1, 1]),
        ("vector ghost", sympy.Integer(-1), Bundle(kind="vector"), transverse),
        ("scalar ghost", sympy.Integer(-1), Bundle(kind="scalar", excluded=1), longitudinal),
    ]
    return [Trace(name=n, sign=s, bundle=b, operator=sympy.expand(o)) for n, s, b, o in parts]


def _quotient(numerator: sympy.Expr, denominator: sympy.Expr) -> sympy.Expr:
    import sympy

    quotient, rest = sympy.div(sympy.expand(numerator), sympy.expand(denominator), delta())
    assert sympy.simplify(rest) == 0
    return quotient


def whole_fields(traces: list[Trace], geometry: Geometry) -> list[Trace]:
    """The York components of the traceless tensor, and of the ghost, put together again: possible where their
    operators are those of one operator Delta + e R + ... on the whole field (see `spectra.COMPOSED`). Raises
    NotYet where they are not."""
    import sympy

    d, R, D = geometry.d, curvature(), delta()
    by_name = {t.name: t for t in traces}

    def together(names: tuple[str, ...], shifts: tuple[sympy.Expr, ...], kind: str) -> Trace:
        first = by_name[names[0]]
        for name, shift in zip(names[1:], shifts, strict=True):
            part = by_name[name]
            moved = first.operator.subs(D, D + shift * R)
            ratio = sympy.simplify(part.operator / moved)
            if ratio.free_symbols & {D, R} or part.sign != first.sign:
                raise NotYet(
                    "a cutoff of undecomposed fields in this gauge",
                    remedy='use cutoff = "Ib", or gauge = "harmonic" with an action linear in R',
                )
        return Trace(name=names[0], sign=first.sign, bundle=Bundle(kind=kind), operator=first.operator)

    tensor = together(
        ("tensor", "vector", "sigma"), (-(d + 1) / (d * (d - 1)), -2 / (d - 1)), "traceless"
    )
    # the ghost operator is that of the transverse ghost on the whole vector
    ghost = together(("vector ghost", "scalar ghost"), (-1 / d,), "full-vector")
    return [tensor, by_name["trace"], ghost]
