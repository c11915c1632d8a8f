"""Regulators the shared tests run over, and their shapes written down a second time, for mpmath numbers."""

from __future__ import annotations

from collections.abc import Callable

import mpmath
import sympy

from frg.regulator.base import AbstractRegulator, LoopRule
from frg.regulator.shapes import Custom, Exponential, Flat, Gaussian, Mass, Power, Theta

Y = sympy.Symbol("y")
LORENTZ = Custom(expression=(1 + Y) ** -4)
BUMP = Custom(
    expression=sympy.Symbol("a") * sympy.exp(-Y) * (1 + sympy.Symbol("b") * Y), values=(("a", 1.5), ("b", 0.3))
)

SHAPES: list[tuple[AbstractRegulator, Callable]] = [
    (Flat(), lambda y: 1 - y),
    (Flat(alpha=0.5), lambda y: (1 - y) / 2),
    (Flat(alpha=1.75), lambda y: 1.75 * (1 - y)),
    (Theta(alpha=0.75, power=2.0), lambda y: 0.75 * (1 - y) ** 2),
    (Theta(power=3.0), lambda y: (1 - y) ** 3),
    (Theta(alpha=2.0, power=1.5), lambda y: 2 * (1 - y) ** 1.5),
    (Exponential(), lambda y: y / mpmath.expm1(y)),
    (Exponential(alpha=4.0, s=0.5), lambda y: 4 * y / mpmath.expm1(y / 2)),
    (Gaussian(), lambda y: mpmath.exp(-y)),
    (Gaussian(alpha=4.5), lambda y: 4.5 * mpmath.exp(-y)),
    (Gaussian(alpha=0.25), lambda y: mpmath.exp(-y) / 4),
    (Power(), lambda y: y**-2),
    (Power(alpha=2.0, b=1.5), lambda y: 2 * y**-1.5),
    (Mass(), lambda y: 1 + 0 * y),
    (Mass(alpha=2.5), lambda y: 2.5 + 0 * y),
    (BUMP, lambda y: 1.5 * mpmath.exp(-y) * (1 + 0.3 * y)),
    (LORENTZ, lambda y: (1 + y) ** -4),
]
REGULATORS = [regulator for regulator, _ in SHAPES]
EXPONENTIALLY_FALLING = [r for r in REGULATORS if r.name in ("exponential", "gaussian") or r is BUMP]


def label(case: object) -> str:
    regulator = case[0] if isinstance(case, tuple) else case
    if not isinstance(regulator, AbstractRegulator):
        return str(case)
    return "-".join([regulator.name, *(f"{k}{v:g}" for k, v in regulator.parameters.items())])


def integral(rule: LoopRule, integrand: Callable) -> float:
    """sum over the nodes of weight * integrand(y, s, s', s''), with the surface term of the LoopRule contract."""
    total = float(rule.weight @ integrand(rule.y, *rule.s))
    if len(rule.surface_y):
        without = rule.surface_s.copy()
        without[2] = 0.0
        on, off = integrand(rule.surface_y, *rule.surface_s), integrand(rule.surface_y, *without)
        total += float(rule.surface_weight @ (on - off))
    return total
