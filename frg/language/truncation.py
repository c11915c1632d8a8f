"""`Truncation`: what flows, in which space, from which action. The first stage's main type.

Expressions are sympy trees. Names stay plain symbols; the meaning of a name (field, parameter,
definition, coupling) is looked up in the tables of the truncation, never in the symbol itself.

* parameters, fields, definitions, couplings, coordinates, Lorentz names: `sympy.Symbol(name)`
* a running function: `sympy.Function(name)(arguments)`
* `diff(U(rho), rho)`: `sympy.Derivative`
* `d(phi, mu, ...)`: `sympy.Function("d")(phi, mu, ...)`
* threshold functions of typed-in flows: `sympy.Function("l")(n, w[, eta])`
* `vd` in typed-in flows: `sympy.Symbol("vd")`
* the curvature scalar of the sphere: `sympy.Symbol("R")`
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from frg.errors import InputError, Place
from frg.language.algebra import Refused, constant_value, substitute
from frg.language.gravity import Gravity

if TYPE_CHECKING:
    import sympy


@dataclass(frozen=True, kw_only=True)
class ScalarField:
    """Real scalar multiplet. `components` is an expression in the parameters; 1 means one real
    scalar. With components != 1 only powers of phi^2 = phi_a phi_a may occur."""

    name: str
    components: sympy.Expr


@dataclass(frozen=True, kw_only=True)
class Grid:
    """Chebyshev grid: number of points, and box size in units of the minimum of the potential."""

    points: int
    upto: float


@dataclass(frozen=True, kw_only=True)
class RunningFunction:
    """A running function of one or more coordinates.

    Exactly one of `about` and `grid` is set. `about` is "minimum" or an expression (a number or
    parameters): the expansion point, the same for all coordinates. `order` is an expression in
    the order symbol (None on a grid). `coefficients` is "derivative" or "power"."""

    name: str
    of: tuple[str, ...]
    about: sympy.Expr | str | None
    order: sympy.Expr | None
    grid: Grid | None = None
    coefficients: str = "derivative"


@dataclass(frozen=True, kw_only=True)
class RunningCoupling:
    """A running number that appears in the action (or has a typed-in flow) under its own name."""

    name: str


@dataclass(frozen=True, kw_only=True)
class WaveFunction:
    """Wave-function renormalisation as a number Z; gives eta = -d_t ln Z, drops out of the couplings.

    `mode` is "auto" (Goldstone mode for components != 1, radial mode for a single scalar),
    "goldstone" or "radial"; `at` is "minimum" (default) or an expression: where on the potential the
    two-point function is read."""

    name: str
    mode: str = "auto"
    at: sympy.Expr | str = "minimum"


@dataclass(frozen=True, kw_only=True)
class RegulatorChoice:
    """Name and parameters of a regulator as written; `expression` only for custom shapes."""

    name: str
    parameters: dict[str, float] = field(default_factory=dict)
    expression: str | None = None


@dataclass(frozen=True, kw_only=True)
class StudySettings:
    """The order axis: the order symbol and the values it runs over by default."""

    order: str = "n"
    values: tuple[int, ...] = ()


@dataclass(frozen=True, kw_only=True)
class Truncation:
    """A truncation of the effective average action, complete: a run can be repeated from it alone.

    `parameters` are exact numbers: sympy.Rational, or constants such as sqrt(2) where the file says so.
    Exactly one of `lagrangian` and `flow` is set. `definitions` keep the file's order and may use one
    another downwards. `dimension` is sympy.nan where a typed-in flow leaves it out. `text` is the file
    verbatim (parameters hold the values in force, overrides included), `source` its name for messages;
    neither takes part in comparisons."""

    title: str
    reference: str | None
    text: str = field(compare=False)
    source: str = field(compare=False)
    dimension: sympy.Expr
    geometry: str
    parameters: dict[str, sympy.Expr]
    fields: tuple[ScalarField, ...]
    definitions: dict[str, sympy.Expr]
    running: tuple[RunningFunction | RunningCoupling | WaveFunction, ...]
    lagrangian: sympy.Expr | None
    flow: dict[str, sympy.Expr] | None
    regulator: RegulatorChoice
    study: StudySettings
    gravity: Gravity | None = None

    @property
    def functions(self) -> tuple[RunningFunction, ...]:
        return tuple(r for r in self.running if isinstance(r, RunningFunction))

    @property
    def couplings(self) -> tuple[RunningCoupling, ...]:
        return tuple(r for r in self.running if isinstance(r, RunningCoupling))

    @property
    def wave_functions(self) -> tuple[WaveFunction, ...]:
        return tuple(r for r in self.running if isinstance(r, WaveFunction))

    def value(self, expression: sympy.Expr, *, order: int | None = None) -> sympy.Expr:
        """The expression with the parameters in force, and the order symbol if `order` is given, put in.

        Exact. Raises InputError where the result is undefined or too large to write down."""
        import sympy

        values = dict(self.parameters)
        if order is not None:
            values[self.study.order] = sympy.Integer(order)
        try:
            return substitute(expression, values)
        except Refused as refusal:
            raise self._no_number(expression, refusal) from None

    def numeric(self, expression: sympy.Expr, *, order: int | None = None) -> float:
        """The double nearest to `value(expression)`.

        Raises InputError where names are left over or the value is undefined."""
        exact = self.value(expression, order=order)
        if exact.is_Number and not exact.is_finite:
            return float(exact)
        try:
            number = constant_value(exact)
        except Refused as refusal:
            raise self._no_number(expression, refusal) from None
        if number is None:
            left = ", ".join(sorted(s.name for s in exact.free_symbols)) or str(exact)
            raise self._no_number(expression, Refused(f"no value is known for {left}", "declare it in [parameters]"))
        return number

    def expanded(self, expression: sympy.Expr) -> sympy.Expr:
        """The expression with all definitions put in, so that only fields, parameters and running
        quantities are left (arguments of running functions included)."""
        values: dict[str, sympy.Expr] = {}
        try:
            for name, definition in self.definitions.items():
                values[name] = substitute(definition, values)
            return substitute(expression, values)
        except Refused as refusal:
            raise self._no_number(expression, refusal) from None

    def order_of(self, function: RunningFunction, order: int) -> int | None:
        """The highest power kept of a running function at one value of the order symbol; None on a grid.

        Raises InputError where that is no whole number or leaves no coupling."""
        if function.order is None:
            return None
        number = self.value(function.order, order=order)
        least = 2 if function.about == "minimum" else 1
        where = f"order {function.order} of {function.name} is {number} at {self.study.order} = {order}"
        place = Place(source=self.source, text=str(function.order))
        if not number.is_Integer:
            raise InputError(f"the {where}, no whole number", remedy="use whole numbers only", place=place)
        if number < least:
            raise InputError(
                f"the {where}, which leaves no coupling",
                remedy=f"it must be at least {least} about {function.about}: raise the values of the study",
                place=place,
            )
        return int(number)

    def _no_number(self, expression: sympy.Expr, refusal: Refused) -> InputError:
        place = Place(source=self.source, text=str(expression)[:60])
        return InputError(refusal.message, remedy=refusal.remedy, place=place)
