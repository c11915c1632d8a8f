"""The truncation-file reader: TOML text -> `Truncation`, or one error that names place and remedy."""

from __future__ import annotations

import os
import re
from collections.abc import Mapping
from typing import TYPE_CHECKING

from frg.errors import InputError, NotYet, Place
from frg.language.action import check_action
from frg.language.curvature import CURVATURE, check_curvature_action
from frg.language.document import Document, load_document, read_text
from frg.language.grammar import parse
from frg.language.gravity import read_gravity
from frg.language.names import LORENTZ, RESERVED, RESERVED_CALLS, NameTable, is_name, suggestion
from frg.language.sections import (
    Running,
    coordinate_names,
    read_definitions,
    read_dimension,
    read_fields,
    read_metric,
    read_parameters,
    read_running,
)
from frg.language.settings import order_symbol, read_regulator, read_study
from frg.language.tokens import place_of
from frg.language.toml_places import Path
from frg.language.truncation import RunningFunction, Truncation, WaveFunction

if TYPE_CHECKING:
    import sympy

SECTIONS = (
    "title",
    "reference",
    "space",
    "parameters",
    "fields",
    "definitions",
    "running",
    "action",
    "flow",
    "gravity",
    "regulator",
    "study",
)
_LATER = {
    "family": "run the members one by one",
}


def read_truncation(
    path: str | os.PathLike[str],
    *,
    overrides: Mapping[str, str] | None = None,
    source_text: str | None = None,
) -> Truncation:
    """The truncation in a file, with `overrides` ({"d": "2.7"}) put in for parameters.

    `source_text` stands in for the file's content where that is already at hand (a stored run). Raises
    InputError, naming file, line, column, the offending text and the remedy, for anything it cannot
    read, and NotYet for what is understood but cannot be computed."""
    text = read_text(path) if source_text is None else source_text
    return read_truncation_text(text, source=os.fspath(path), overrides=overrides)


def read_truncation_text(text: str, *, source: str, overrides: Mapping[str, str] | None = None) -> Truncation:
    """The truncation in a text; `source` is its name in messages. Errors as in `read_truncation`."""
    document = load_document(text, source)
    _check_sections(document)
    typed = _is_typed(document)
    geometry = document.choice(("space", "geometry"), ("flat", "sphere"), "flat")
    sphere = geometry == "sphere" and not typed
    metric = read_metric(document, sphere=sphere)
    kinds = _claim_names(document, typed=typed, sphere=sphere)
    parameters = read_parameters(document, overrides or {})
    dimension = read_dimension(document, parameters, optional=typed)
    fields = read_fields(document, parameters)
    of_kind = {name: kind for name, kind in kinds.items() if kind in ("parameter", "field")}
    definitions = read_definitions(document, of_kind)
    study = read_study(document)
    coordinates: Mapping[str, object] | None = None if typed else ({CURVATURE: None} if sphere else definitions)
    running = read_running(document, parameters, study.order, coordinates)
    truncation = Truncation(
        title=document.string(("title",), '"…"'),
        reference=None if document.get(("reference",)) is None else document.string(("reference",), '"…"'),
        text=text,
        source=source,
        dimension=dimension,
        geometry=geometry,
        parameters=parameters,
        fields=fields,
        definitions=definitions,
        running=running,
        lagrangian=None if typed else _lagrangian(document, kinds, running),
        flow=_flow(document, kinds, running, dimension) if typed else None,
        regulator=read_regulator(document),
        study=study,
        gravity=read_gravity(document, metric, parameters) if metric is not None else None,
    )
    _check_orders(document, truncation)
    if not typed:
        _check_action(document, truncation)
    return truncation


def _check_action(document: Document, truncation: Truncation) -> None:
    """`check_action`, with the column of the offending part where it stands in the text as printed."""
    path = ("action", "lagrangian")
    start = document.value_place(path)
    try:
        (check_action if truncation.gravity is None else check_curvature_action)(truncation, place=start)
    except InputError as error:
        text, fragment = document.string(path, '"…"'), error.place.text or ""
        words = re.findall(r"\w+|[^\w\s]", fragment)
        found = re.search(r"(?<!\w)" + r"\s*".join(map(re.escape, words)) + r"(?!\w)", text) if words else None
        if found is None or fragment == start.text:
            raise
        place = place_of(text, found.start(), found.end(), start)
        raise type(error)(error.message, remedy=error.remedy, place=place) from None


def _check_sections(document: Document) -> None:
    """Unknown keys at the top and in sections with fixed keys, and what is not supported yet."""
    document.check_keys((), SECTIONS, _LATER)
    document.check_keys(("space",), ("dimension", "geometry"))
    document.check_keys(("action",), ("lagrangian",))
    if document.get(("title",)) is None:
        document.fail("the truncation has no title", 'add title = "…" at the top', (), key=True)
    if not document.table(("running",)):
        document.fail(
            "nothing runs: [running] is missing or empty (is the file complete?)",
            'add [running] with U = { kind = "function", of = "rho", about = "minimum", order = "n" }',
            ("running",),
            key=True,
        )


def _is_typed(document: Document) -> bool:
    action, flow = document.get(("action",)) is not None, document.get(("flow",)) is not None
    if action and flow:
        document.fail("the file has both [action] and [flow]", "keep one of them", ("flow",), key=True)
    if not action and not flow:
        document.fail(
            "the file has neither [action] nor [flow] (is it complete?)",
            'add [action] with lagrangian = "…", or [flow] with a beta function for every running quantity',
            (),
            key=True,
        )
    return flow


def _claim_names(document: Document, *, typed: bool, sphere: bool) -> dict[str, str]:
    """Every name of the file with what it is; a name may be declared only once."""
    kinds: dict[str, str] = {CURVATURE: "curvature"} if sphere else {}

    def claim(name: str, kind: str, path: Path) -> None:
        if not is_name(name):
            document.fail(
                f"{name[:60]!r} cannot be a name",
                "use an ASCII letter, then letters, digits, underscores",
                path,
                key=True,
            )
        if name in RESERVED or (kind == "running function" and name in RESERVED_CALLS):
            document.fail(
                f"{name!r} has a fixed meaning and cannot name a {kind}",
                "choose another name",
                path,
                key=True,
            )
        if kinds.get(name) == "curvature":
            document.fail(f"{name!r} is the curvature scalar of the sphere", "choose another name", path, key=True)
        if name in kinds:
            document.fail(f"{name!r} is already the name of a {kinds[name]}", "rename one of them", path, key=True)
        kinds[name] = kind

    for section, kind in (("parameters", "parameter"), ("fields", "field"), ("definitions", "definition")):
        for name in document.table((section,)):
            claim(name, kind, (section, name))
    running = document.table(("running",))
    words = {"function": "running function", "wave-function": "wave function"}
    for name, value in running.items():
        word = value.get("kind") if isinstance(value, dict) else None
        claim(name, words.get(word if isinstance(word, str) else "", "coupling"), ("running", name))
    if document.get(("study", "order")) is not None or any(
        isinstance(v, dict) and "order" in v for v in running.values()
    ):
        claim(order_symbol(document), "order symbol", ("study", "order"))
    for name in [n for n, kind in kinds.items() if kind == "running function"]:
        if typed:
            _claim_coordinates(document, name, kinds)
        _check_coupling_names(document, name, kinds)
    return kinds


def _claim_coordinates(document: Document, function: str, kinds: dict[str, str]) -> None:
    path = ("running", function)
    for name in coordinate_names(document, path):
        if name in RESERVED or kinds.get(name, "coordinate") != "coordinate":
            what = kinds.get(name, "reserved word")
            document.fail(
                f"{name!r} is the coordinate of {function} and already a {what}",
                "in a typed-in flow a coordinate is a free name: rename one of them",
                (*path, "of"),
            )
        kinds[name] = "coordinate"


def _check_coupling_names(document: Document, function: str, kinds: Mapping[str, str]) -> None:
    """Couplings of a function U are reported as U1, U2, U_min: nothing else that runs may be called so."""
    for name, kind in kinds.items():
        rest = name.removeprefix(function)
        if kind == "coupling" and name != function and name.startswith(function) and (rest.isdigit() or rest == "_min"):
            document.fail(
                f"{name!r} is also the name of a coupling of the function {function}",
                "rename one of them",
                ("running", name),
                key=True,
            )


def _lagrangian(document: Document, kinds: Mapping[str, str], running: tuple[Running, ...]) -> sympy.Expr:
    path = ("action", "lagrangian")
    example = '"f(R)"' if "curvature" in kinds.values() else '"d(phi,mu)^2/2 + U(rho)"'
    if document.get(path) is None:
        document.fail("[action] has no lagrangian", f"add lagrangian = {example}", ("action",), key=True)
    text = document.string(path, example)
    operator = re.search(r"(?<!\w)d\s*\(\s*\w+\s*,[^()]*\)", text) if "curvature" in kinds.values() else None
    if operator is not None:
        raise InputError(
            "derivatives of fields have no place in an action of the metric",
            remedy="remove them, and count matter in [gravity] matter",
            place=place_of(text, operator.start(), operator.end(), document.value_place(path)),
        )
    plain = ("parameter", "field", "definition", "coupling", "wave function", "curvature")
    names = NameTable(
        names={n: k for n, k in kinds.items() if k in plain},
        functions=_arities(running),
        differentiable=frozenset(n for n, k in kinds.items() if k in ("field", "definition")),
        lorentz=tuple(n for n in LORENTZ if n not in kinds),
        advice="declare it in [running], [parameters], [fields] or [definitions]",
    )
    return parse(text, names=names, place=document.value_place(path))


def _arities(running: tuple[Running, ...]) -> dict[str, int]:
    return {r.name: len(r.of) for r in running if isinstance(r, RunningFunction)}


def _flow(
    document: Document, kinds: Mapping[str, str], running: tuple[Running, ...], dimension: sympy.Expr
) -> dict[str, sympy.Expr]:
    """The typed-in beta functions, one for every running quantity."""
    import sympy

    table = document.table(("flow",))
    known = [r.name for r in running]
    for r in running:
        if isinstance(r, WaveFunction):
            raise NotYet(
                f"a wave function in a typed-in flow ([running] {r.name}) is not supported yet",
                remedy="write the anomalous dimension into the flow as an expression or a parameter",
                place=document.key_place(("running", r.name)),
            )
        if r.name not in table:
            document.fail(
                f"[flow] has no beta function for {r.name}",
                f'add {r.name} = "…" to [flow]',
                ("running", r.name),
                key=True,
            )
    plain = ("parameter", "definition", "coupling", "coordinate")
    names = NameTable(
        names={n: k for n, k in kinds.items() if k in plain} | {"vd": "volume factor"},
        functions=_arities(running),
        thresholds=True,
        advice="declare it in [running], [parameters] or [definitions]",
    )
    found: dict[str, sympy.Expr] = {}
    for name in table:
        if name not in known:
            document.fail(
                f"[flow] gives a beta function for {name!r}, which is not in [running]",
                suggestion(name, known, f"add {name} to [running]"),
                ("flow", name),
                key=True,
            )
        found[name] = parse(
            document.string(("flow", name), '"…"'), names=names, place=document.value_place(("flow", name))
        )
        needs_dimension = found[name].has(sympy.Symbol("vd")) or found[name].has(sympy.Function("l"))
        if dimension is sympy.nan and needs_dimension:
            document.fail(
                "vd and l depend on the dimension, and [space] dimension is missing",
                "add [space] with dimension = 3",
                ("flow", name),
            )
    return {name: found[name] for name in known}


def _check_orders(document: Document, truncation: Truncation) -> None:
    """An order that leaves no coupling is refused for every value of the study."""
    for function in truncation.functions:
        for value in truncation.study.values:
            try:
                truncation.order_of(function, value)
            except InputError as error:
                place = document.value_place(("running", function.name, "order"))
                merged = Place(source=place.source, line=place.line, column=place.column, text=place.text)
                raise InputError(error.message, remedy=error.remedy, place=merged) from None
