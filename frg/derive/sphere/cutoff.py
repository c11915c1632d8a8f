"""The regulated trace of every mode family: W = d_t R_k/(operator + R_k) as a function of y.

Type I puts the regulator in the place of the Laplacian: Delta + a R = z -> P = z + k^2 s(z/k^2) in every operator;
type II takes for a R the whole curvature term of a second-order operator; type III takes for z the whole operator,
whose couplings run too (A. Codello, R. Percacci, C. Rahmede, Ann. Phys. 324 (2009) 414, arXiv:0805.2909). Type Ia
and II act on undecomposed fields, Ib on York components. With R_k = O(P) - O(z), at fixed Laplacian and curvature,
  d_t R_k = sum_p (d_t o_p)(P^p - z^p) + O'(P) (2 s - 2 y s') k^2,    O(z) = sum_p o_p z^p.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from frg.derive import symbols
from frg.derive.sphere.action import AbstractAction
from frg.derive.sphere.hessian import Trace, curvature, delta
from frg.derive.sphere.spectra import Bundle
from frg.errors import NotYet
from frg.language.gravity import Gravity

if TYPE_CHECKING:
    import sympy


@dataclass(frozen=True, kw_only=True)
class Regulated:
    """sign * Tr[numerator/denominator] over a bundle, in `symbols.momentum()` y and the shape; linear in the t-derivatives
    `symbols.rate` in the numerator. The argument of the regulator is Delta + endomorphism R + offset."""

    name: str
    sign: sympy.Expr
    bundle: Bundle
    endomorphism: sympy.Expr
    offset: sympy.Expr
    numerator: sympy.Expr
    denominator: sympy.Expr


def regulated(trace: Trace, action: AbstractAction, gravity: Gravity) -> Regulated:
    """The trace with the cutoff of the truncation. Raises NotYet where that type does not exist for its operator."""
    import sympy

    R, D = curvature(), delta()
    operator = sympy.Poly(sympy.expand(trace.operator), D)
    offset: sympy.Expr = sympy.Integer(0)
    if gravity.cutoff in ("II", "III"):
        leading, rest = _second_order(trace, operator)
        endomorphism = sympy.simplify((rest.subs(R, 1) - rest.subs(R, 0)) / leading)
        if gravity.cutoff == "III":
            offset = sympy.simplify(rest.subs(R, 0) / leading)
    else:
        endomorphism = _type_one(trace, gravity)
    shifted = sympy.Poly(sympy.expand(operator.as_expr().subs(D, D - endomorphism * R - offset)), D)
    numerator, denominator = _quotient(shifted, action, gravity, offset)
    return Regulated(
        name=trace.name, sign=trace.sign, bundle=trace.bundle, endomorphism=endomorphism, offset=offset,
        numerator=numerator, denominator=denominator,
    )


def _type_one(trace: Trace, gravity: Gravity) -> sympy.Expr:
    """The endomorphism of the mode family; matter is regulated with its Laplacian alone."""
    import sympy

    if trace.name.startswith(MATTER):
        return sympy.Integer(0)
    kinds = {"tensor": "tensor", "traceless": "tensor", "vector": "vector", "full-vector": "vector", "scalar": "scalar"}
    return gravity.endomorphism[kinds[trace.bundle.kind]]


MATTER = "matter"


def _second_order(trace: Trace, operator: sympy.Poly) -> tuple[sympy.Expr, sympy.Expr]:
    if operator.degree() != 1:
        raise NotYet(
            f"cutoff types II and III for operators of higher order ({trace.name} modes)",
            remedy='use cutoff = "Ib", or an action linear in R',
        )
    return operator.coeff_monomial(delta()), operator.coeff_monomial(1)


def _quotient(
    operator: sympy.Poly, action: AbstractAction, gravity: Gravity, offset: sympy.Expr
) -> tuple[sympy.Expr, sympy.Expr]:
    """(d_t R_k, operator + R_k) with z = y in units of k."""
    import sympy

    y, P = symbols.momentum(), symbols.inverse_propagator()
    insertion = symbols.regulator_insertion(sympy.Integer(0))
    coefficients = {p: c for (p,), c in operator.terms()}
    total = sympy.Integer(0)
    for p, c in coefficients.items():
        if p:
            moving = sympy.Integer(0) if gravity.one_loop else action.rate(c)
            total += moving * (P**p - y**p) + p * c * P ** (p - 1) * insertion
    if offset != 0 and not gravity.one_loop:
        # type III: z itself runs, by its offset; R_k = A s(z) for an operator A z
        total += coefficients[1] * symbols.shape(1) * action.rate(offset)
    return total, operator.as_expr().subs(delta(), P)


def matter_traces(gravity: Gravity, d: sympy.Expr) -> list[Trace]:
    """Minimally coupled matter: scalars Delta; Dirac fermions (i D)^2 = Delta + R/4; Abelian vectors in the Feynman gauge,
    Delta + R/d on the whole vector, with two scalar ghosts Delta each."""
    import sympy

    half, R, D = sympy.Rational(1, 2), curvature(), delta()
    N = gravity.matter
    # type I regulates with the Laplacian alone: its operators keep their curvature terms
    found = [
        Trace(name=f"{MATTER} scalar", sign=half * N["scalars"], bundle=Bundle(kind="scalar"), operator=D),
        Trace(name=f"{MATTER} spinor", sign=-half * N["dirac"], bundle=Bundle(kind="spinor"), operator=D + R / 4),
        Trace(name=f"{MATTER} vector", sign=half * N["vectors"], bundle=Bundle(kind="full-vector"), operator=D + R / d),
        Trace(name=f"{MATTER} ghost", sign=-N["vectors"], bundle=Bundle(kind="scalar"), operator=D),
    ]
    return [t for t in found if t.sign != 0]
