"""What a user would write without frg: sympy expands the flow, lambdify compiles it, scipy finds roots.

The flow is that of one real scalar with the flat regulator in d = 3, in units where the loop constant is 1
(D. Litim, Nucl. Phys. B 631 (2002) 128, hep-th/0203006):

    d_t u = -3 u + rho u' + 1/(1 + u' + 2 rho u''),   u = sum_{m >= 2} lambda_m (rho - kappa)^m / m!.

The program is written with care, so that the comparison is with good work: the series of 1/(...) by its recursion
instead of repeated differentiation, the textbook form of d_t kappa, common subexpressions taken out, an exact
Jacobian. It shares no line with the package and also referees it: both sides' roots are counted by `accepts`.
"""

from __future__ import annotations

import time
import warnings
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import scipy.optimize
import sympy

LOOP = 6 * np.pi**2  # rho here = LOOP * rho in units of k: 1/LOOP = 4 v_d/d in d = 3
ACCEPTED = 1e-8


@dataclass(frozen=True)
class Derived:
    """beta(g) and its Jacobian at one order; g = (kappa, lambda_2, ..., lambda_n). `seconds` is the time to
    derive and compile beta, `jacobian_seconds` that for the Jacobian on top."""

    order: int
    beta: Callable[..., list[float]]
    jacobian: Callable[..., list[list[float]]]
    seconds: float
    jacobian_seconds: float

    def residual(self, g: np.ndarray) -> np.ndarray:
        return np.array(self.beta(*g), dtype=float)

    def slope(self, g: np.ndarray) -> np.ndarray:
        return np.array(self.jacobian(*g), dtype=float)

    def accepts(self, g: np.ndarray) -> bool:
        """max |beta| below 1e-8 in units of the largest coupling, and not the degenerate constant potential."""
        with np.errstate(all="ignore"):
            if not np.isfinite(g).all() or abs(g[1]) < 1e-9:
                return False
            worst = float(np.max(np.abs(self.residual(g))))
        return bool(worst < ACCEPTED * max(1.0, float(np.max(np.abs(g)))))


def derive(order: int) -> Derived:
    """Expand the flow to `order` and compile beta functions and Jacobian."""
    begun = time.perf_counter()
    kappa = sympy.Symbol("kappa")
    lambdas = sympy.symbols(f"lambda_2:{order + 1}")
    zero = sympy.Integer(0)
    # u[k] = u^(k)(kappa)/k!, and the same for u', u'' and the denominator
    u = [zero, zero] + [value / sympy.factorial(m) for m, value in enumerate(lambdas, start=2)] + [zero, zero, zero]
    slope = [(k + 1) * u[k + 1] for k in range(order + 2)]
    bend = [(k + 2) * (k + 1) * u[k + 2] for k in range(order + 1)]
    below = [(1 if k == 0 else 0) + slope[k] + 2 * kappa * bend[k] + 2 * (bend[k - 1] if k else 0) for k in range(order + 1)]
    loop = [1 / below[0]]
    for k in range(1, order + 1):
        loop.append(-sum(below[j] * loop[k - j] for j in range(1, k + 1)) / below[0])
    flow = [
        -3 * u[k] + kappa * slope[k] + (slope[k - 1] if k else 0) + loop[k] for k in range(order + 1)
    ]
    moving = -flow[1] / lambdas[0]
    beta = [moving]
    for m in range(2, order + 1):
        following = lambdas[m - 1] if m < order else zero
        beta.append(sympy.factorial(m) * flow[m] + following * moving)
    unknowns = (kappa, *lambdas)
    compiled = sympy.lambdify(unknowns, beta, modules="math", cse=True)
    half = time.perf_counter()
    jacobian = sympy.lambdify(
        unknowns, [[sympy.diff(b, g) for g in unknowns] for b in beta], modules="math", cse=True
    )
    return Derived(order, compiled, jacobian, half - begun, time.perf_counter() - half)


@dataclass(frozen=True)
class Searched:
    """What came of a number of starts: genuine roots reached, wall time."""

    starts: int
    converged: int
    seconds: float


def search(derived: Derived, starts: np.ndarray, *, exact_jacobian: bool) -> Searched:
    """scipy.optimize.root (hybr) from every start."""
    converged = 0
    begun = time.perf_counter()
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")  # slow progress and overflows are counted as failures below
        for start in starts:
            try:
                found = scipy.optimize.root(
                    derived.residual, start, jac=derived.slope if exact_jacobian else None, method="hybr"
                )
            except (OverflowError, ZeroDivisionError):
                continue
            converged += derived.accepts(found.x)
    return Searched(len(starts), converged, time.perf_counter() - begun)


def in_loop_units(couplings: np.ndarray) -> np.ndarray:
    """(S, n) couplings (U_min, U2, ..., Un) in units of k as (kappa, lambda_2, ..., lambda_n)."""
    count = couplings.shape[1]
    powers = np.array([1.0, *(1.0 - m for m in range(2, count + 1))])
    return couplings * LOOP**powers
