"""The section [gravity]: gauge, cutoff, endomorphism, parametrisation, approximation, matter."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from frg.language.document import Document, shown
from frg.language.toml_places import Path

if TYPE_CHECKING:
    import sympy

CUTOFFS = ("Ia", "Ib", "II", "III")
FAMILIES = ("tensor", "vector", "scalar")
MATTER = ("scalars", "dirac", "vectors")


def no_matter() -> dict[str, sympy.Expr]:
    """No minimally coupled fields."""
    import sympy

    return dict.fromkeys(MATTER, sympy.Integer(0))


@dataclass(frozen=True, kw_only=True)
class Gauge:
    """F_m = D^n h_mn - (1 + beta)/d D_m h with the term F_m F^m/(2 alpha); alpha = 0: F_m = 0 strictly. `beta` is
    None for the harmonic gauge, alpha = 1 and beta = d/2 - 1 whatever the dimension."""

    alpha: sympy.Expr
    beta: sympy.Expr | None


@dataclass(frozen=True, kw_only=True)
class Gravity:
    """How the flow of a metric is derived: conventions that a truncation of gravity must state.

    `cutoff` is a type in the sense of Codello, Percacci, Rahmede, Ann. Phys. 324 (2009) 414; `endomorphism` gives a
    for every mode family, so that the regulator's argument is Delta + a R; `parametrisation` is
    linear (g + h) or exponential; `one_loop` drops t-derivatives of couplings on the right-hand side; `matter`
    counts minimally coupled fields (numbers or expressions in the parameters)."""

    metric: str
    gauge: Gauge
    cutoff: str
    endomorphism: dict[str, sympy.Expr]
    parametrisation: str = "linear"
    one_loop: bool = False
    matter: dict[str, sympy.Expr] = field(default_factory=no_matter)


def read_gravity(document: Document, metric: str, parameters: Mapping[str, sympy.Expr]) -> Gravity:
    """The section, or its defaults: alpha = beta = 0, cutoff Ib, linear, no matter."""
    document.check_keys(
        ("gravity",), ("gauge", "cutoff", "endomorphism", "parametrisation", "approximation", "matter")
    )
    matter = no_matter()
    path: Path = ("gravity", "matter")
    if not isinstance(document.get(path), (dict, type(None))):
        document.fail("matter is counted by kind", "write matter = { scalars = 4, dirac = 0, vectors = 1 }", path)
    document.check_keys(path, MATTER)
    for name in document.table(path):
        matter[name] = _number(document, (*path, name), parameters)
    return Gravity(
        metric=metric,
        gauge=_gauge(document, parameters),
        cutoff=document.choice(("gravity", "cutoff"), CUTOFFS, "Ib"),
        endomorphism=_endomorphism(document, parameters),
        parametrisation=document.choice(("gravity", "parametrisation"), ("linear", "exponential"), "linear"),
        one_loop=document.choice(("gravity", "approximation"), ("full", "one-loop"), "full") == "one-loop",
        matter=matter,
    )


def _number(document: Document, path: Path, parameters: Mapping[str, sympy.Expr]) -> sympy.Expr:
    from frg.language.sections import constant, expression, parameter_names

    value = expression(document, path, parameter_names(parameters))
    constant(document, path, value, parameters)
    return value


def _gauge(document: Document, parameters: Mapping[str, sympy.Expr]) -> Gauge:
    import sympy

    path: Path = ("gravity", "gauge")
    value = document.get(path)
    if value is None:
        return Gauge(alpha=sympy.Integer(0), beta=sympy.Integer(0))
    if type(value) is str:
        document.choice(path, ("harmonic",), "harmonic")
        return Gauge(alpha=sympy.Integer(1), beta=None)
    if not isinstance(value, dict):
        document.fail(f"no gauge is called {value}", 'write gauge = "harmonic" or { alpha = 0, beta = 0 }', path)
    document.check_keys(path, ("alpha", "beta"))
    for key in ("alpha", "beta"):
        if document.get((*path, key)) is None:
            document.fail(f"the gauge has no {key}", "write gauge = { alpha = 0, beta = 0 }", path, key=True)
    return Gauge(alpha=_number(document, (*path, "alpha"), parameters), beta=_number(document, (*path, "beta"), parameters))


def _endomorphism(document: Document, parameters: Mapping[str, sympy.Expr]) -> dict[str, sympy.Expr]:
    import sympy

    path: Path = ("gravity", "endomorphism")
    value = document.get(path)
    if value is None:
        return dict.fromkeys(FAMILIES, sympy.Integer(0))
    if not isinstance(value, dict):
        return dict.fromkeys(FAMILIES, _number(document, path, parameters))
    document.check_keys(path, FAMILIES)
    if not value:
        document.fail(f"{shown(path)} is empty", "write endomorphism = 0, or one number a mode family", path)
    return {
        name: _number(document, (*path, name), parameters) if name in value else sympy.Integer(0) for name in FAMILIES
    }
