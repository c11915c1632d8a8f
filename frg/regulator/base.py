"""The contract of a regulator, and the quadrature rule it hands to loops.

R_k(q^2) = Z k^2 s(y), y = q^2/k^2. With P(y) = y + s(y) the regulated inverse propagator (in
units of Z k^2) and t = ln k,  d_t R_k = Z k^2 [(2 - eta) s - 2 y s'].
"""

from __future__ import annotations

import abc
import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar

import numpy as np

if TYPE_CHECKING:
    import sympy


ACCURACY = 2e-13  # relative error wanted of loop integrals


@dataclass(frozen=True, kw_only=True, eq=False)
class LoopRule:
    """A rule for  integral_0^inf dy y^(d/2-1) F(y, s, s', s'', ...),  weights y^(d/2-1) included.

    `y`, `weight` (m,); `s` (j+1, m): s and its first j derivatives at the nodes.
    Where s'' has a delta function (the kink of the flat shape) `surface_y`, `surface_weight` (k,)
    and `surface_s` (j+1, k) describe it: s' there is the average of its two sides, s'' is the
    strength of the delta, and the loop gains
    sum surface_weight * [F(.., s'' = strength) - F(.., s'' = 0)], exact for F linear in s''.
    `subtract` says that the loop converges only up to a constant independent of the fields: the
    integrand at vanishing masses is subtracted node by node. `error` estimates the relative
    error; `lowest` is min over y of P(y): the regulated propagator 1/(P + w) is positive for w > -lowest."""

    y: np.ndarray
    weight: np.ndarray
    s: np.ndarray
    surface_y: np.ndarray
    surface_weight: np.ndarray
    surface_s: np.ndarray
    subtract: bool
    error: float
    lowest: float


class AbstractRegulator(abc.ABC):
    """A shape s(y) with its parameters as fields. Concrete classes are frozen dataclasses whose
    fields are the parameters (floats); they know nothing of truncations or jax."""

    name: ClassVar[str]
    reference: ClassVar[str]
    support: ClassVar[float] = math.inf  # s(y) vanishes beyond it

    @abc.abstractmethod
    def shape(self) -> sympy.Expr:
        """s(y) inside its support, in the symbol y and the parameters. Not defined for a sharp cutoff."""

    @property
    @abc.abstractmethod
    def parameters(self) -> dict[str, float]:
        """Parameter values by name, in a fixed order."""

    @abc.abstractmethod
    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        """Quadrature for loops in `dimension` with s-derivatives up to `derivatives`, with as few nodes as give
        the relative `accuracy` on test integrands (every node costs in the compiled flow).

        `decay` is the least power of the propagator 1/(P + w) in the integrand (1 for the flow of a potential).
        Raises InputError where the loop diverges or s is not smooth enough for the derivatives asked for."""

    @property
    def closed_form(self) -> bool:
        """True for the sharp cutoff: no integrand exists, loops have a closed form instead."""
        return False
