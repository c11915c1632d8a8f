"""What a user would write without frg: sympy expands the flow, lambdify compiles it, scipy finds roots.

The flow is that of one real scalar with the flat regulator in d = 3, in units where the loop constant is 1
(D. Litim, Nucl. Phys. B 631 (2002) 128, hep-th/0203006):

    d_t u = -3 u + rho u' + 1/(1 + u' + 2 rho u''),   u = sum_{m >= 2} lambda_m (rho - kappa)^m / m!.

Two versions. `derive_plainly` differentiates the flow n times and compiles what comes out: a dozen lines, what one
writes first. `derive` is written with care: the series of 1/(...) by its recursion, common subexpressions taken out,
plain floats instead of numpy scalars, an exact Jacobian; both use the textbook form of d_t kappa. They share no line
with the package, and also referee it: everybody's roots are counted by the careful version's `accepts`.
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
    jacobian: Callable[..., list[list[float]]] | None
    seconds: float
    jacobian_seconds: float

    def residual(self, g: np.ndarray) -> np.ndarray:
        return np.array(self.beta(*g), dtype=float)

    def slope(self, g: np.ndarray) -> np.ndarray:
        assert self.jacobian is not None
        return np.array(self.jacobian(*g), dtype=float)

    def accepts(self, g: np.ndarray) -> bool:
        """max |beta| below 1e-8 in units of the largest coupling, and not the degenerate constant potential."""
        with np.errstate(all="ignore"):
            if not np.isfinite(g).all() or abs(g[1]) < 1e-9:
                return False
            worst = float(np.max(np.abs(self.residual(g))))
        return bool(worst < ACCEPTED * max(1.0, float(np.max(np.abs(g)))))


def derive_plainly(order: int) -> Derived:
    """Differentiate the flow, put rho = kappa, compile."""
    begun = time.perf_counter()
    rho, kappa = sympy.symbols("rho kappa")
    lambdas = sympy.symbols(f"lambda_2:{order + 1}")
    u = sum(value * (rho - kappa) ** m / sympy.factorial(m) for m, value in enumerate(lambdas, start=2))
    flow = -3 * u + rho * u.diff(rho) + 1 / (1 + u.diff(rho) + 2 * rho * u.diff(rho, 2))
    rows = []
    for _ in range(order):
        flow = flow.diff(rho)
        rows.append(flow.subs(rho, kappa))
    moving = -rows[0] / lambdas[0]
    beta = [moving] + [
        rows[m - 1] + (lambdas[m - 1] if m < order else 0) * moving for m in range(2, order + 1)
    ]
    compiled = sympy.lambdify((kappa, *lambdas), beta)
    return Derived(order, compiled, None, time.perf_counter() - begun, 0.0)


def derive(order: int) -> Derived:
    """Expand the flow to `order` and compile beta functions and Jacobian, with care."""
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


def search(derived: Derived, starts: np.ndarray, *, exact_jacobian: bool, referee: Derived) -> Searched:
    """scipy.optimize.root (hybr) from every start; the referee's time is not counted."""
    ends = []
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
            ends.append(found.x)
    seconds = time.perf_counter() - begun
    return Searched(len(starts), sum(referee.accepts(end) for end in ends), seconds)


def in_loop_units(couplings: np.ndarray) -> np.ndarray:
    """(S, n) couplings (U_min, U2, ..., Un) in units of k as (kappa, lambda_2, ..., lambda_n)."""
    count = couplings.shape[1]
    powers = np.array([1.0, *(1.0 - m for m in range(2, count + 1))])
    return couplings * LOOP**powers
