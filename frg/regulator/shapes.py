"""The shapes s(y) of regulators R_k = Z k^2 s(q^2/k^2), as frozen value objects."""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, ClassVar

import numpy as np

from frg.errors import InputError, Place
from frg.regulator.base import ACCURACY, AbstractRegulator, LoopRule
from frg.regulator.quadrature import (
    algebraic_rule,
    compact_rule,
    decaying_rule,
    lowest_propagator,
    shape_table,
)

if TYPE_CHECKING:
    import sympy


def _require(regulator: AbstractRegulator, name: str, condition: bool, wanted: str) -> None:
    value = regulator.parameters[name]
    if not (math.isfinite(value) and condition):
        raise InputError(
            f"regulator {regulator.name}: {name} = {value:g} is not allowed", remedy=f"{name} must be {wanted}",
            place=Place(text=f"{name}={value:g}"),
        )


@dataclass(frozen=True, kw_only=True)
class _Shape(AbstractRegulator):
    """Common parts: parameters are the fields; s(y) lives on 0 < y < support."""

    @property
    def parameters(self) -> dict[str, float]:
        return {f.name: float(getattr(self, f.name)) for f in fields(self)}

    def _table(self, derivatives: int):  # type: ignore[no-untyped-def]
        return shape_table(self.shape(), self.parameters, derivatives)


@dataclass(frozen=True, kw_only=True)
class Theta(_Shape):
    """alpha (1-y)^power below y = 1, zero above; power 1 is `Flat`."""

    name: ClassVar[str] = "theta"
    reference: ClassVar[str] = "I. Balog et al., Phys. Rev. Lett. 123 (2019) 240604, arXiv:1907.01829"
    support: ClassVar[float] = 1.0
    alpha: float = 1.0
    power: float = 1.0

    def __post_init__(self) -> None:
        _require(self, "alpha", self.alpha > 0, "positive")
        _require(self, "power", self.power >= 1, "at least 1")

    def shape(self) -> sympy.Expr:
        import sympy

        y, alpha = sympy.symbols("y alpha")
        return alpha * (1 - y) ** sympy.nsimplify(self.power)

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        _positive_dimension(dimension)
        if self.power == 1.0:
            return Flat(alpha=self.alpha).rule(dimension, derivatives=derivatives, decay=decay, accuracy=accuracy)
        if derivatives > self.power:
            raise InputError(
                f"theta with power {self.power:g} has no bounded derivative of order {derivatives} at its edge",
                remedy=f"use a power of at least {derivatives}, or a smooth shape",
            )
        table = self._table(derivatives)
        count = 40 if accuracy < 1e-8 else 12
        return compact_rule(table, dimension, count, None, lowest_propagator(table, 1 - 1e-12))


@dataclass(frozen=True, kw_only=True)
class Flat(_Shape):
    """alpha (1-y) below y = 1, zero above; with alpha = 1 the propagator is constant below y = 1."""

    name: ClassVar[str] = "flat"
    reference: ClassVar[str] = "D. Litim, Phys. Rev. D 64 (2001) 105007, hep-th/0103195"
    support: ClassVar[float] = 1.0
    alpha: float = 1.0

    def __post_init__(self) -> None:
        _require(self, "alpha", self.alpha > 0, "positive")

    def shape(self) -> sympy.Expr:
        import sympy

        y, alpha = sympy.symbols("y alpha")
        return alpha * (1 - y)

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        _positive_dimension(dimension)
        if derivatives > 2:
            raise InputError(
                "the flat shape has a kink: derivatives beyond the second do not exist",
                remedy="use a smooth shape, for example exponential",
            )
        # two nodes are exact where P is constant (alpha = 1): the integrand is then at most cubic in y
        count = 2 if self.alpha == 1.0 else (40 if accuracy < 1e-8 else 12)
        return compact_rule(self._table(derivatives), dimension, count, -self.alpha, min(self.alpha, 1.0))


@dataclass(frozen=True, kw_only=True)
class Exponential(_Shape):
    """alpha y/(exp(s y) - 1)."""

    name: ClassVar[str] = "exponential"
    reference: ClassVar[str] = "C. Wetterich, Phys. Lett. B 301 (1993) 90"
    alpha: float = 1.0
    s: float = 1.0

    def __post_init__(self) -> None:
        _require(self, "alpha", self.alpha > 0, "positive")
        _require(self, "s", self.s > 0, "positive")

    def shape(self) -> sympy.Expr:
        import sympy

        y, alpha, s = sympy.symbols("y alpha s")
        return alpha * y / (sympy.exp(s * y) - 1)

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        return _decaying(self._table(derivatives), dimension, accuracy)


@dataclass(frozen=True, kw_only=True)
class Gaussian(_Shape):
    """alpha exp(-y)."""

    name: ClassVar[str] = "gaussian"
    reference: ClassVar[str] = "G. De Polsi et al., Phys. Rev. E 101 (2020) 042113, arXiv:2001.07525"
    alpha: float = 1.0

    def __post_init__(self) -> None:
        _require(self, "alpha", self.alpha > 0, "positive")

    def shape(self) -> sympy.Expr:
        import sympy

        y, alpha = sympy.symbols("y alpha")
        return alpha * sympy.exp(-y)

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        return _decaying(self._table(derivatives), dimension, accuracy)


@dataclass(frozen=True, kw_only=True)
class Power(_Shape):
    """alpha y^(-b): a power law at large momenta."""

    name: ClassVar[str] = "power"
    reference: ClassVar[str] = "T. R. Morris, Phys. Lett. B 329 (1994) 241, hep-ph/9403340"
    alpha: float = 1.0
    b: float = 2.0

    def __post_init__(self) -> None:
        _require(self, "alpha", self.alpha > 0, "positive")
        _require(self, "b", self.b > 0, "positive")

    def shape(self) -> sympy.Expr:
        import sympy

        y, alpha, b = sympy.symbols("y alpha b")
        return alpha * y ** (-b)

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        # min over y of y + alpha y^-b, at y = (alpha b)^(1/(1+b))
        y = (self.alpha * self.b) ** (1 / (1 + self.b))
        return _algebraic(self, self._table(derivatives), dimension, self.b, decay, accuracy, y + self.alpha * y ** (-self.b))


@dataclass(frozen=True, kw_only=True)
class Mass(_Shape):
    """The constant alpha (Callan-Symanzik type); loops converge only in low dimension, and the flow of a potential only up
    to a constant independent of the fields."""

    name: ClassVar[str] = "mass"
    reference: ClassVar[str] = "K. Symanzik, Commun. Math. Phys. 18 (1970) 227; C. Callan, Phys. Rev. D 2 (1970) 1541"
    alpha: float = 1.0

    def __post_init__(self) -> None:
        _require(self, "alpha", self.alpha > 0, "positive")

    def shape(self) -> sympy.Expr:
        import sympy

        return sympy.Symbol("alpha")

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        return _algebraic(self, self._table(derivatives), dimension, 0.0, decay, accuracy, self.alpha)


@dataclass(frozen=True, kw_only=True)
class Sharp(_Shape):
    """The limit of a step at y = 1: threshold functions l_0 = -ln(1+w), l_n = (1+w)^-n; no integrand."""

    name: ClassVar[str] = "sharp"
    reference: ClassVar[str] = "F. Wegner, A. Houghton, Phys. Rev. A 8 (1973) 401"

    @property
    def closed_form(self) -> bool:
        return True

    def shape(self) -> sympy.Expr:
        raise InputError(
            "the sharp cutoff has no shape s(y): it is a limit of steps", remedy="use its threshold functions"
        )

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        raise InputError(
            "the sharp cutoff has no loop integrand, only closed forms for momentum-independent vertices",
            remedy="use it without wave-function renormalisation, or choose another regulator",
        )


@dataclass(frozen=True, kw_only=True)
class Custom(_Shape):
    """A shape of the user's: an expression in y and named parameters. Validated when it is made: finite where
    loops need it, positive, and falling faster than any power."""

    name: ClassVar[str] = "custom"
    reference: ClassVar[str] = "user"
    expression: sympy.Expr
    values: tuple[tuple[str, float], ...] = ()

    def __post_init__(self) -> None:
        from frg.language.wording import expression_text

        text = expression_text(self.expression)
        for name, _ in self.values:
            _require(self, name, True, "finite")
        y = np.concatenate([np.geomspace(1e-8, 0.05, 30), np.linspace(0.06, 12, 120)])
        try:
            s = shape_table(self.shape(), self.parameters, 1)(y)
        except (ZeroDivisionError, ValueError, OverflowError, TypeError) as error:
            raise _unfit(text, f"it cannot be evaluated for all y > 0 ({error})") from None
        if not np.isfinite(s).all():
            raise _unfit(text, "it is not finite for all y > 0")
        if not (s[0] > 0).all():
            raise _unfit(text, f"it is not positive at y = {y[np.argmin(s[0])]:.4g}")
        if not s[0][0] * y[0] < 1e-3:
            raise _unfit(text, "y s(y) does not vanish for y to 0")

    @property
    def parameters(self) -> dict[str, float]:
        return dict(self.values)

    def shape(self) -> sympy.Expr:
        return self.expression

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        return _decaying(self._table(derivatives), dimension, accuracy)


def _unfit(text: str, why: str) -> InputError:
    return InputError(
        f"the custom regulator {text} is not admissible: {why}",
        remedy="use a positive shape that is finite for y > 0 and decays, for example a*exp(-y)*(1+b*y)",
        place=Place(text=text),
    )


def _decaying(table, dimension: float, accuracy: float) -> LoopRule:  # type: ignore[no-untyped-def]
    _positive_dimension(dimension)
    lowest = lowest_propagator(table, 12.0)
    for nodes in PANEL_NODES[:-1]:
        try:
            rule = decaying_rule(table, dimension, nodes, lowest)
        except InputError:
            continue  # too coarse to tell anything; only the finest rule decides that a loop does not converge
        if rule.error < accuracy:
            return rule
    return decaying_rule(table, dimension, PANEL_NODES[-1], lowest)


PANEL_NODES = (5, 8, 14, 20, 28, 40)  # a panel; the least that suffices is taken


def _algebraic(  # type: ignore[no-untyped-def]
    regulator: _Shape, table, dimension: float, b: float, decay: int, accuracy: float, lowest: float
) -> LoopRule:
    _positive_dimension(dimension)
    fall, subtract = b + decay, False
    if fall <= dimension / 2 and decay == 1:
        # the part that does not depend on the fields diverges; what is left falls by one more power
        fall, subtract = b + 2, True
    if fall <= dimension / 2:
        raise InputError(
            f"the loop diverges with the regulator {regulator.name} in d = {dimension:g}",
            remedy="lower the dimension, or choose a regulator that decays faster",
        )
    return algebraic_rule(table, dimension, fall, 48 if accuracy < 1e-8 else 12, subtract, lowest, decay)


def _positive_dimension(dimension: float) -> None:
    if not (math.isfinite(dimension) and dimension > 0):
        raise InputError(
            f"loops need a positive dimension, not {dimension:g}", remedy="give [space] dimension > 0"
        )
