"""The shapes s(y) of regulators R_k = Z k^2 s(q^2/k^2), as frozen value objects."""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, ClassVar

import numpy as np

from frg.errors import InputError, Place
from frg.regulator.base import ACCURACY, AbstractRegulator, LoopRule
from frg.regulator.quadrature import Loop, algebraic_rule, compact_rule, decaying_rule, exact_flat_rule
from frg.regulator.tables import Table, least_propagator, power_of_decay, shape_table

if TYPE_CHECKING:
    import sympy

FAR = 60.0  # min P is looked for below it, in units of the width of the shape: P grows like y beyond


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

    def _table(self, derivatives: int) -> Table:
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

        y, alpha, power = sympy.symbols("y alpha power")
        return alpha * (1 - y) ** (sympy.Integer(int(self.power)) if self.power == int(self.power) else power)

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        """With d_t R, which vanishes like (1-y)^(power-1) at the edge, undifferentiated and `derivatives` derivatives of s
        in all, integrands are integrable and free of surface terms where derivatives < 2*power. Without that
        factor (after an integration by parts) they are where derivatives < power + 1."""
        _positive_dimension(dimension)
        p = self.power
        if p == 1.0:
            return Flat(alpha=self.alpha).rule(dimension, derivatives=derivatives, decay=decay, accuracy=accuracy)
        if derivatives >= 2 * p:
            raise InputError(
                f"theta with power {p:g} is not smooth enough at its edge for {derivatives} derivatives",
                remedy=f"use a power above {derivatives / 2:g}, or a smooth shape",
            )
        smooth = p == int(p)
        guarded = derivatives >= p + 1
        steepest = 2 * p - 1 - derivatives if guarded else p - derivatives
        if smooth:  # the derivative of order `power` is constant, the next vanishes
            steepest = max(steepest, 0.0)
        dip = 1 - (self.alpha * p) ** (-1 / (p - 1)) if self.alpha * p > 1 else 0.0
        loop = Loop(
            table=self._table(max(derivatives, 2)), derivatives=derivatives, dimension=dimension,
            dip=dip, lowest=dip + self.alpha * (1 - dip) ** p, decay=decay, accuracy=accuracy,
            edge=min(0.0, steepest - (p - 1)), steepest=min(0.0, steepest), guarded=guarded,
        )
        return compact_rule(loop, smooth=smooth, roots=_roots(p))


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
        if self.alpha == 1.0:
            return exact_flat_rule(self._table(derivatives), dimension)
        loop = Loop(
            table=self._table(2), derivatives=derivatives, dimension=dimension, lowest=min(self.alpha, 1.0), dip=0.0,
            decay=decay, accuracy=accuracy,
        )
        return compact_rule(loop, smooth=True, kink=-self.alpha)


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
        far = (FAR + 2 * math.log1p(self.alpha)) / self.s
        return _decaying(self._table(max(derivatives, 2)), dimension, derivatives, decay, accuracy, far)


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
        far = FAR + 2 * math.log1p(self.alpha)
        return _decaying(self._table(max(derivatives, 2)), dimension, derivatives, decay, accuracy, far)


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
        return alpha * y ** (-sympy.Integer(int(self.b)) if self.b == int(self.b) else -b)

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        # min over y of y + alpha y^-b, at y = (alpha b)^(1/(1+b))
        y = (self.alpha * self.b) ** (1 / (1 + self.b))
        lowest = y + self.alpha * y ** (-self.b)
        return _algebraic(self, dimension, self.b, derivatives, decay, accuracy, (y, lowest), _roots(self.b), self.b)


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
        return _algebraic(self, dimension, 0.0, derivatives, decay, accuracy, (0.0, self.alpha), (1.0,))


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
            "the sharp cutoff has no loop integrand: its loops have closed forms, l_0 = -ln(1+w) and l_n = 1/(1+w)^n, "
            "for vertices without momenta",
            remedy="use it for potentials without wave-function renormalisation and for typed-in flows, or "
            "choose another regulator",
        )


@dataclass(frozen=True, kw_only=True)
class Custom(_Shape):
    """A shape of the user's: an expression in y and named parameters. Validated when it is made: y s(y) finite at
    the origin, s finite and positive on a dense set of y, falling to zero."""

    name: ClassVar[str] = "custom"
    reference: ClassVar[str] = "user"
    expression: sympy.Expr
    values: tuple[tuple[str, float], ...] = ()

    def __post_init__(self) -> None:
        from frg.language.wording import expression_text

        text = expression_text(self.expression)
        for name, _ in self.values:
            _require(self, name, True, "finite")
        # round numbers are among the points: poles that people write down lie there
        y = np.concatenate([np.geomspace(1e-8, 0.05, 30), np.arange(3, 601) / 50, np.geomspace(12.5, 300, 60)])
        try:
            table = shape_table(self.shape(), self.parameters, 1)
            s = table(y)
            b = power_of_decay(table)
        except (ZeroDivisionError, ValueError, OverflowError, TypeError) as error:
            raise _unfit(text, f"it cannot be evaluated for all y > 0 ({error})") from None
        if not np.isfinite(s).all():
            raise _unfit(text, "it is not finite for all y > 0")
        for part in (y <= 12, y > 12):
            if not (s[0][part] > 0).all() and not _underflows(s[0]):
                raise _unfit(text, f"it is not positive at y = {y[part][np.argmin(s[0][part])]:.4g}")
        if s[0][0] * y[0] > 1.5 * max(s[0][1] * y[1], 1e-6):
            raise _unfit(text, "y s(y) grows without bound for y to 0")
        if b is not None and not b > 0:
            raise _unfit(text, "for large y it does not fall like a power of y or faster")

    @property
    def parameters(self) -> dict[str, float]:
        return dict(self.values)

    def shape(self) -> sympy.Expr:
        return self.expression

    def rule(
        self, dimension: float, *, derivatives: int = 2, decay: int = 1, accuracy: float = ACCURACY
    ) -> LoopRule:
        table = self._table(max(derivatives, 2))
        b = power_of_decay(table)
        if b is None:
            return _decaying(table, dimension, derivatives, decay, accuracy, 1e3, (1.0, 0.5))
        least = least_propagator(table, 1e3)
        return _algebraic(self, dimension, b, derivatives, decay, accuracy, least, _roots(b))


def _underflows(s: np.ndarray) -> bool:
    """True where s falls below the smallest double and stays there."""
    zero = s == 0
    first = int(np.argmax(zero))
    return bool(0 < first and (s[:first] > 0).all() and zero[first:].all() and s[first - 1] < 1e-100)


def _unfit(text: str, why: str) -> InputError:
    return InputError(
        f"the custom regulator {text} is not admissible: {why}",
        remedy="use a positive shape that is finite for y > 0 and decays, for example a*exp(-y)*(1+b*y)",
        place=Place(text=text),
    )


def _roots(power: float) -> tuple[float, ...]:
    """Exponents q of variables y^q in which y and y^power are analytic, or at least smoother."""
    for m in (1, 2, 3, 4):
        if abs(m * power - round(m * power)) < 1e-12:
            return (1.0,) if m == 1 else (1 / m,)
    return (0.5, 1 / 3, 0.25)


def _decaying(
    table: Table, dimension: float, derivatives: int, decay: int, accuracy: float, far: float,
    roots: tuple[float, ...] = (1.0,),
) -> LoopRule:
    _positive_dimension(dimension)
    dip, lowest = least_propagator(table, far)
    loop = Loop(
        table=table, derivatives=derivatives, dimension=dimension, lowest=lowest, dip=dip, decay=decay, accuracy=accuracy
    )
    return decaying_rule(loop, roots=roots)


def _algebraic(
    regulator: _Shape, dimension: float, b: float, derivatives: int, decay: int, accuracy: float,
    least: tuple[float, float], roots: tuple[float, ...], rise: float = 0.0,
) -> LoopRule:
    """Where the integrand d_t R / (P+w)^decay, which falls like y^(-b-decay), is not integrable for decay = 1, the part
    that does not depend on the fields is subtracted: what is left falls by one more power."""
    _positive_dimension(dimension)
    fall, subtract = b + decay, False
    if fall <= dimension / 2 and decay == 1:
        fall, subtract = b + 2, True
    if fall <= dimension / 2:
        raise InputError(
            f"the loop diverges with the regulator {regulator.name} in d = {dimension:g}: its integrand falls like "
            f"y^(-{fall - dimension / 2 + 1:g})",
            remedy="lower the dimension, or choose a regulator that decays faster",
        )
    dip, lowest = least
    loop = Loop(
        table=regulator._table(max(derivatives, 2)), derivatives=derivatives, dimension=dimension, lowest=lowest, dip=dip,
        decay=2 if subtract else decay, accuracy=accuracy,
    )
    return algebraic_rule(loop, fall=fall, subtract=subtract, roots=roots, rise=rise)


def _positive_dimension(dimension: float) -> None:
    if not (math.isfinite(dimension) and dimension > 0):
        raise InputError(
            f"loops need a positive dimension, not {dimension:g}", remedy="give [space] dimension > 0"
        )
