"""Reserved symbols of the derived equations. Braces keep them apart from any name a user can write."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import sympy


def jet(function: str, orders: Sequence[int]) -> sympy.Symbol:
    """Symbol of the derivative of a running function, of the given order in each coordinate."""
    import sympy

    return sympy.Symbol(f"{function}{{{','.join(str(k) for k in orders)}}}")


def rate(name: str, orders: Sequence[int] | None = None) -> sympy.Symbol:
    """Symbol of the t-derivative of a coupling, or of a jet of a running function, on the right of a flow."""
    import sympy

    return sympy.Symbol(f"{RATE}{name}") if orders is None else jet(f"{RATE}{name}", orders)


RATE = "d_t "


def shape(derivative: int) -> sympy.Symbol:
    """s(y) or one of its derivatives inside a loop integrand."""
    import sympy

    return sympy.Symbol(f"s{{{derivative}}}")


def momentum() -> sympy.Symbol:
    """y = q^2/k^2 inside a loop integrand."""
    import sympy

    return sympy.Symbol("y{}")


def anomalous(wave_function: str) -> sympy.Symbol:
    """eta = -d_t ln Z for the wave-function renormalisation of this name."""
    import sympy

    return sympy.Symbol(f"eta{{{wave_function}}}")


def loop_value(index: int) -> sympy.Symbol:
    """Placeholder of a loop integral in a right-hand side."""
    import sympy

    return sympy.Symbol(f"loop{{{index}}}")


def volume() -> sympy.Symbol:
    """v_d = 1/(2^(d+1) pi^(d/2) Gamma(d/2))."""
    import sympy

    return sympy.Symbol("vd")


def inverse_propagator() -> sympy.Expr:
    """P(y) = y + s(y), in units of Z k^2."""
    return momentum() + shape(0)


def regulator_insertion(eta: sympy.Expr) -> sympy.Expr:
    """d_t R_k / (Z k^2) = (2 - eta) s - 2 y s'."""
    return (2 - eta) * shape(0) - 2 * momentum() * shape(1)


def regulator_insertion_slope(eta: sympy.Expr) -> sympy.Expr:
    """d/dy of `regulator_insertion`: -eta s' - 2 y s''."""
    return -eta * shape(1) - 2 * momentum() * shape(2)
