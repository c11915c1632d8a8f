"""The sections of a truncation file, one function each: TOML values -> parts of a `Truncation`."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from frg.errors import InputError, NotYet, Place
from frg.language.algebra import Refused, SafeAlgebra, check_result, constant_value, substitute
from frg.language.document import Document, shown
from frg.language.grammar import parse
from frg.language.names import NameTable, is_name, listing, suggestion
from frg.language.toml_places import Path
from frg.language.truncation import (
    Grid,
    RunningCoupling,
    RunningFunction,
    ScalarField,
    WaveFunction,
)

if TYPE_CHECKING:
    import sympy

Running = RunningFunction | RunningCoupling | WaveFunction

KINDS = ("function", "coupling", "wave-function")
MOST_GRID_POINTS = 1000
_PARAMETER_ADVICE = "declare it in [parameters]"


def expression(document: Document, path: Path, names: NameTable) -> sympy.Expr:
    """The value at `path`, a number or text in the grammar, as an exact expression."""
    value = document.get(path)
    if type(value) is str:
        return parse(value, names=names, place=document.value_place(path))
    if isinstance(value, (int, str)) and not isinstance(value, bool):
        return exact_number(document, path, str(value))
    document.fail(f"{shown(path)} must be a number or an expression in quotes", f'write {path[-1]} = 3 or "…"', path)


def exact_number(document: Document, path: Path, text: str) -> sympy.Expr:
    """A TOML number by its text; "inf" and "nan" are refused."""
    if "inf" in text or "nan" in text:
        document.fail(f"{shown(path)} is not finite", "give a finite number", path)
    try:
        number = SafeAlgebra().number(text.lstrip("+-"))
        check_result(number)
    except Refused as refusal:
        document.fail(refusal.message, refusal.remedy, path)
    return -number if text.startswith("-") else number


def constant(document: Document, path: Path, value: sympy.Expr, parameters: Mapping[str, sympy.Expr]) -> float:
    """The double nearest to an expression with the parameters put in; errors at `path`."""
    try:
        number = constant_value(substitute(value, parameters))
    except Refused as refusal:
        document.fail(refusal.message, refusal.remedy, path)
    if number is None:
        document.fail(f"{shown(path)} has no value", _PARAMETER_ADVICE, path)
    return number


def read_parameters(document: Document, overrides: Mapping[str, str]) -> dict[str, sympy.Expr]:
    """Exact values in the file's order, overrides put in before later ones are worked out."""
    table = document.table(("parameters",))
    for name, text in overrides.items():
        if name not in table:
            advice = "only names in [parameters] can be set"
            raise InputError(
                f"there is no parameter {name!r} to set",
                remedy=suggestion(name, table, advice),
                place=Place(source="--set", text=f"{name}={text}"),
            )
    values: dict[str, sympy.Expr] = {}
    for name in table:
        path = ("parameters", name)
        if name in overrides:
            values[name] = _override(name, overrides[name])
            continue
        earlier = NameTable(names=dict.fromkeys(values, "parameter"), advice="declare it further up in [parameters]")
        value = expression(document, path, earlier)
        constant(document, path, value, values)
        values[name] = substitute(value, values)
    return values


def _override(name: str, text: str) -> sympy.Expr:
    place = Place(source="--set", text=f"{name}={text}"[:80])
    try:
        value = parse(text.strip(), names=NameTable(advice="give a number such as 2.7 or 1/3"), place=place)
        constant_value(value)
    except InputError as error:
        raise InputError(
            f"the value of {name} is no finite number: {error.message}", remedy=error.remedy, place=place
        ) from None
    except Refused as refusal:
        raise InputError(f"the value of {name}: {refusal.message}", remedy=refusal.remedy, place=place) from None
    return value


def read_dimension(document: Document, parameters: Mapping[str, sympy.Expr], *, optional: bool) -> sympy.Expr:
    """The dimension, a positive number once the parameters are in; nan where it may be left out and is."""
    import sympy

    path = ("space", "dimension")
    if document.get(path) is None:
        if optional:
            return sympy.nan
        document.fail("[space] dimension is missing", "add [space] with dimension = 3", ("space",), key=True)
    value = expression(document, path, parameter_names(parameters))
    number = constant(document, path, value, parameters)
    if number <= 0:
        document.fail(f"the dimension is {number:g}", "give a dimension above 0", path)
    return value


def parameter_names(parameters: Mapping[str, object]) -> NameTable:
    return NameTable(names=dict.fromkeys(parameters, "parameter"), advice=_PARAMETER_ADVICE)


def read_fields(document: Document, parameters: Mapping[str, sympy.Expr]) -> tuple[ScalarField, ...]:
    import sympy

    found = []
    for name, value in document.table(("fields",)).items():
        path: Path = ("fields", name)
        if isinstance(value, dict):
            path = (*path, "kind")
            if "kind" not in value:
                document.fail(
                    f"the field {name} has no kind",
                    f'write {name} = {{ kind = "scalar" }}',
                    path[:2],
                    key=True,
                )
        kind = document.choice(path, ("scalar", "dirac", "metric"), "scalar")
        if kind == "metric":
            continue
        if kind != "scalar":
            raise NotYet(
                f"fields of kind {kind!r} ([fields] {name}) are not supported yet",
                remedy="use scalar fields, count minimally coupled ones in [gravity] matter, or type the beta functions "
                "into [flow]",
                place=document.value_place(path),
            )
        components: sympy.Expr = sympy.Integer(1)
        if isinstance(value, dict):
            document.check_keys(("fields", name), ("kind", "components"))
            if "components" in value:
                where = ("fields", name, "components")
                components = expression(document, where, parameter_names(parameters))
                constant(document, where, components, parameters)
        found.append(ScalarField(name=name, components=components))
    return tuple(found)


def read_metric(document: Document, *, sphere: bool) -> str | None:
    """The name of the metric; it belongs to the sphere, and the sphere to it."""
    fields = document.table(("fields",))
    kinds = {name: value.get("kind") if isinstance(value, dict) else value for name, value in fields.items()}
    metrics = [name for name, kind in kinds.items() if kind == "metric"]
    if not sphere:
        remedy = 'write geometry = "sphere" in [space]'
        if document.get(("flow",)) is not None:
            remedy = "remove it: [flow] gives the beta functions themselves"
        if metrics:
            document.fail('a metric needs an [action] and geometry = "sphere"', remedy, ("fields", metrics[0]))
        if document.get(("gravity",)) is not None:
            document.fail('[gravity] needs an [action] and geometry = "sphere"', remedy, ("gravity",), key=True)
        return None
    for name, kind in kinds.items():
        if kind not in ("scalar", "dirac", "metric"):
            remedy = f"remove {name}" if metrics else f'write {name} = "metric"'
            document.fail(f"the field {name} is no metric", remedy, ("fields", name), key=True)
        if kind == "metric" and isinstance(fields[name], dict):
            document.check_keys(("fields", name), ("kind",))
        if kind != "metric":
            document.fail(
                f"{name} is a {kind} field: matter on the sphere is minimally coupled and enters by number",
                f"remove {name} and write [gravity] matter = {{ scalars = 1 }}", ("fields", name), key=True,
            )
    if not metrics:
        document.fail('geometry = "sphere" needs a metric', 'write [fields] with g = "metric"', ("space", "geometry"))
    if len(metrics) > 1:
        document.fail(
            f"{metrics[1]} is a second metric", f"remove {metrics[1]} or {metrics[0]}", ("fields", metrics[1]), key=True
        )
    return metrics[0]


def read_definitions(document: Document, known: Mapping[str, str]) -> dict[str, sympy.Expr]:
    """Definitions in the file's order; each may use fields, parameters and earlier definitions."""
    found: dict[str, sympy.Expr] = {}
    for name in document.table(("definitions",)):
        names = NameTable(
            names={**known, **dict.fromkeys(found, "definition")},
            advice="a definition may use fields, parameters and earlier definitions",
        )
        found[name] = expression(document, ("definitions", name), names)
    return found


def read_running(
    document: Document,
    parameters: Mapping[str, sympy.Expr],
    symbol: str,
    coordinates: Mapping[str, object] | None,
) -> tuple[Running, ...]:
    """All running quantities. `coordinates` are the definitions a function may be of (on the sphere the curvature
    alone, which has none); None: free names."""
    found: list[Running] = []
    for name, value in document.table(("running",)).items():
        path = ("running", name)
        if not isinstance(value, dict) or "kind" not in value:
            document.fail(
                f"{name} needs a kind",
                f'write {name} = {{ kind = "coupling" }}, or kind = ' + listing(KINDS),
                path,
                key=True,
            )
        kind = document.choice((*path, "kind"), KINDS, "coupling")
        if kind == "coupling":
            document.check_keys(path, ("kind",))
            found.append(RunningCoupling(name=name))
        elif kind == "wave-function":
            found.append(_wave_function(document, path, parameters))
        else:
            found.append(_function(document, path, parameters, symbol, coordinates))
    return tuple(found)


def _wave_function(document: Document, path: Path, parameters: Mapping[str, sympy.Expr]) -> WaveFunction:
    document.check_keys(path, ("kind", "mode", "at"))
    mode = document.choice((*path, "mode"), ("auto", "goldstone", "radial"), "auto")
    at = _point(document, (*path, "at"), parameters) if document.get((*path, "at")) is not None else "minimum"
    return WaveFunction(name=path[-1], mode=mode, at=at)


def _point(document: Document, path: Path, parameters: Mapping[str, sympy.Expr]) -> sympy.Expr | str:
    """ "minimum", or a finite number or expression in the parameters."""
    if document.get(path) == "minimum":
        return "minimum"
    names = dataclasses.replace(parameter_names(parameters), advice='write "minimum", a number or parameters')
    value = expression(document, path, names)
    constant(document, path, value, parameters)
    return value


def _function(
    document: Document,
    path: Path,
    parameters: Mapping[str, sympy.Expr],
    symbol: str,
    coordinates: Mapping[str, object] | None,
) -> RunningFunction:
    document.check_keys(path, ("kind", "of", "about", "order", "grid", "coefficients"))
    name = path[-1]
    of = _coordinates(document, path, coordinates)
    about, order, grid = None, None, None
    has = {key: document.get((*path, key)) is not None for key in ("about", "order", "grid")}
    if has["about"] == has["grid"]:
        document.fail(
            f"the function {name} needs either about or grid" + (", not both" if has["grid"] else ""),
            'write about = "minimum" with order = "n", or grid = { points = 40, upto = 6.0 }',
            path,
            key=True,
        )
    if has["grid"]:
        if has["order"]:
            document.fail(f"{name} is on a grid and has no order", "remove order", (*path, "order"), key=True)
        if len(of) > 1:
            raise NotYet(
                f"a grid for a function of several coordinates ([running] {name}) is not supported yet",
                remedy="expand about the minimum or a point",
                place=document.key_place((*path, "grid")),
            )
        grid = _grid(document, (*path, "grid"), parameters)
    else:
        about = _point(document, (*path, "about"), parameters)
        if not has["order"]:
            document.fail(f"the function {name} has no order", 'add order = "n"', path, key=True)
        names = NameTable(
            names={**dict.fromkeys(parameters, "parameter"), symbol: "order symbol"},
            advice=f"an order uses the order symbol {symbol!r} and parameters",
        )
        order = expression(document, (*path, "order"), names)
    coefficients = document.choice((*path, "coefficients"), ("derivative", "power"), "derivative")
    return RunningFunction(name=name, of=of, about=about, order=order, grid=grid, coefficients=coefficients)


def coordinate_names(document: Document, path: Path) -> tuple[str, ...]:
    """The names in `of`, without asking whether they are declared."""
    value: Any = document.get((*path, "of"))
    if value is None:
        document.fail(f"the function {path[-1]} does not say of what", 'add of = "rho"', path, key=True)
    names = value if isinstance(value, list) else [value]
    for name in names:
        if type(name) is not str or not is_name(name):
            document.fail(
                f"{name!r} is no name of a coordinate",
                'write of = "rho" or of = ["rho", "tau"]',
                (*path, "of"),
            )
    if not names or len(set(names)) < len(names):
        document.fail("the coordinates must be distinct names", 'write of = ["rho", "tau"]', (*path, "of"))
    return tuple(names)


def _coordinates(document: Document, path: Path, known: Mapping[str, object] | None) -> tuple[str, ...]:
    names = coordinate_names(document, path)
    for name in names:
        if known is not None and name not in known:
            if list(known.values()) == [None]:
                (only,) = known
                document.fail(f"{path[-1]} is a function of {name!r}", f'write of = "{only}"', (*path, "of"))
            document.fail(
                f"{path[-1]} is a function of {name!r}, which is not in [definitions]",
                suggestion(name, known, f'add {name} = "…" in the fields to [definitions]'),
                (*path, "of"),
            )
    return names


def _grid(document: Document, path: Path, parameters: Mapping[str, sympy.Expr]) -> Grid:
    document.table(path)
    document.check_keys(path, ("points", "upto"))
    points = document.get((*path, "points"))
    if not isinstance(points, int) or isinstance(points, bool) or not 4 <= points <= MOST_GRID_POINTS:
        document.fail("grid.points must be a whole number", f"give 4 to {MOST_GRID_POINTS} points", (*path, "points"))
    if document.get((*path, "upto")) is None:
        document.fail("the grid has no upto", "add upto = 6.0, in units of the minimum", path, key=True)
    upto = constant(
        document,
        (*path, "upto"),
        expression(document, (*path, "upto"), parameter_names(parameters)),
        parameters,
    )
    if upto <= 0:
        document.fail("grid.upto must be positive", "give the box size in units of the minimum", (*path, "upto"))
    return Grid(points=points, upto=upto)
