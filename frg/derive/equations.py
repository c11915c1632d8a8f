"""`FlowEquations`: the one intermediate form between an action and numbers.

Every running quantity's t-derivative is a *local expression*: in the coordinates, the jets of
the running functions, the couplings, the parameters, the anomalous dimensions and loop integrals
   loop = integral_0^inf dy y^(d/2-1) integrand(y, s, s', s'', jets).
Everything downstream reads only this.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from frg.language.truncation import RunningFunction, Truncation
from frg.regulator.base import AbstractRegulator

if TYPE_CHECKING:
    import sympy


@dataclass(frozen=True, kw_only=True)
class Loop:
    """A loop integral; `symbol` stands for it in right-hand sides. `decay` is the least power of
    the propagator in the integrand. `surface` says that s'' occurs (linearly), so that a kink of the
    shape contributes a surface term."""

    symbol: str
    integrand: sympy.Expr
    decay: int
    surface: bool


@dataclass(frozen=True, kw_only=True)
class FunctionFlow:
    """d_t of a running function at fixed coordinates. `jets` lists the derivatives that occur, as
    orders in each coordinate. `declared` is the truncation's own description of it.

    Where `rates` is not empty the flow is implicit: `rhs` is an expression that vanishes, linear in the jets
    `symbols.rate` of d_t of the function, whose orders `rates` lists: rhs = b - M d_t f, with which M d_t f = b."""

    name: str
    coordinates: tuple[str, ...]
    rhs: sympy.Expr
    jets: tuple[tuple[int, ...], ...]
    declared: RunningFunction
    rates: tuple[tuple[int, ...], ...] = ()


@dataclass(frozen=True, kw_only=True)
class CouplingFlow:
    """d_t of a coupling that is a number with a flow of its own."""

    name: str
    rhs: sympy.Expr


@dataclass(frozen=True, kw_only=True)
class PolynomialPotential:
    """A potential written out in couplings: V = sum of coefficients(couplings) * monomials.

    `rhs` is d_t V as a local expression in the jets of the function called `name`;
    `terms` maps exponents of the coordinates to the coefficient, an expression in the couplings.
    """

    name: str
    coordinates: tuple[str, ...]
    rhs: sympy.Expr
    jets: tuple[tuple[int, ...], ...]
    couplings: tuple[str, ...]
    terms: dict[tuple[int, ...], sympy.Expr]
    parity: tuple[int, ...]  # 2 where only even powers of the coordinate occur, else 1


@dataclass(frozen=True, kw_only=True)
class InvariantExpansion:
    """How couplings of a function of general invariants sit in the monomials of the fields.

    `function` is expanded as sum U_{ij..} I_1^i I_2^j ..., every invariant given as a polynomial
    in `coordinates` (the fields)."""

    function: RunningFunction
    invariants: tuple[sympy.Expr, ...]


@dataclass(frozen=True, kw_only=True)
class AnomalousDimension:
    """eta = -d_t ln Z, as an expression linear in eta itself and local at one point of the potential.

    `at` is "minimum" or an expression for the coordinate; `mode` tells which mode's two-point function
    was read."""

    symbol: str
    name: str
    field: str
    function: str
    rhs: sympy.Expr
    jets: tuple[tuple[int, ...], ...]
    at: sympy.Expr | str
    mode: str


@dataclass(frozen=True, kw_only=True)
class OddSector:
    """Perturbations phi h(rho) odd in the field of one real scalar: `rhs` is d_t h, linear in the jets
    of the function called `name`, around a background given by the even function's jets."""

    name: str
    function: str
    rhs: sympy.Expr
    jets: tuple[tuple[int, ...], ...]
    background_jets: tuple[tuple[int, ...], ...]


@dataclass(frozen=True, kw_only=True)
class FlowEquations:
    """The derived flow of a truncation with one regulator.

    `positivity` lists expressions w in the jets whose regulated propagators 1/(P + w) run in the loops:
    a fixed point is physical only where every w > -min P, and where every expression of `signs` (with what to say where
    it is not) is positive. `highest_order` is the highest order for which the equations are complete (None: all).
    `quotients` are the (numerator, denominator) pairs under the traces of an open flow on the sphere, for guards.
    `notes` says what the derivation chose."""

    truncation: Truncation
    regulator: AbstractRegulator
    functions: tuple[FunctionFlow, ...]
    couplings: tuple[CouplingFlow, ...]
    potential: PolynomialPotential | None
    invariants: InvariantExpansion | None
    anomalous: tuple[AnomalousDimension, ...]
    odd: OddSector | None
    loops: tuple[Loop, ...]
    positivity: tuple[sympy.Expr, ...]
    closed: bool
    notes: tuple[str, ...] = ()
    signs: tuple[tuple[sympy.Expr, str], ...] = ()
    highest_order: int | None = None
    quotients: tuple[tuple[sympy.Expr, sympy.Expr], ...] = ()
