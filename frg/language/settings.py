"""The sections [regulator] and [study]: choices that go with a truncation file."""

from __future__ import annotations

import dataclasses

from frg.language.document import Document, shown
from frg.language.names import is_name, suggestion
from frg.language.sections import exact_number
from frg.language.shapetext import parse_custom_shape
from frg.language.toml_places import Path
from frg.language.truncation import RegulatorChoice, StudySettings
from frg.language.values import check_orders, number_from_text, orders_from_text, regulator_choice_from_text


def read_regulator(document: Document) -> RegulatorChoice:
    """The regulator by name, by full specification, or by name and further keys."""
    table = document.table(("regulator",))
    if not table:
        return RegulatorChoice(name="flat")
    if "shape" not in table:
        key = next(iter(table))
        document.fail(
            "[regulator] has no shape",
            suggestion(key, ["shape"], 'add shape = "flat"'),
            ("regulator",),
            key=True,
        )
    path = ("regulator", "shape")
    text = document.string(path, '"flat"')
    used = {"shape"}
    if text.strip() == "custom":
        where: Path = ("regulator", "expression")
        used.add("expression")
        if "expression" not in table:
            document.fail("a custom regulator needs its shape", 'add expression = "a*exp(-y)" and a = 1', path)
        choice = RegulatorChoice(name="custom", expression=document.string(where, '"a*exp(-y)"'))
    else:
        where = path
        choice = regulator_choice_from_text(text, place=document.value_place(path))
    parameters = dict(choice.parameters)
    for key in table:
        if key in used:
            continue
        here = ("regulator", key)
        if not is_name(key) or key in ("expression", "y"):
            document.fail(f"{key!r} cannot name a parameter", "use letters, digits and underscores", here, key=True)
        if key in parameters:
            document.fail(f"the parameter {key} is given twice", "remove it here or in the shape", here, key=True)
        parameters[key] = _regulator_parameter(document, here)
    if choice.expression is not None:
        place = document.value_place(where)
        offset = str(document.get(where)).find(choice.expression)
        parse_custom_shape(
            choice.expression,
            parameters,
            place=dataclasses.replace(place, column=(place.column or 1) + max(offset, 0)),
        )
    return dataclasses.replace(choice, parameters=parameters)


def _regulator_parameter(document: Document, path: Path) -> float:
    value = document.get(path)
    if type(value) is str:
        return number_from_text(value, place=document.value_place(path))
    if isinstance(value, (int, str)) and not isinstance(value, bool):
        exact_number(document, path, str(value))
        return float(str(value).replace("_", ""))
    document.fail(f"{shown(path)} must be a number", f"write {path[-1]} = 1.0", path)


def order_symbol(document: Document) -> str:
    value = document.get(("study", "order"))
    if value is None:
        return "n"
    if type(value) is not str or not is_name(value):
        document.fail("[study] order names the order symbol", 'write order = "n"', ("study", "order"))
    return value


def read_study(document: Document) -> StudySettings:
    document.check_keys(
        ("study",),
        ("order", "values"),
        {
            "products": "remove it: all momenta are kept in products of vertices",
            "normalised_at": "remove it: a wave function is read at the minimum, or where its `at` says",
        },
    )
    path = ("study", "values")
    value = document.get(path)
    symbol = order_symbol(document)
    if value is None:
        return StudySettings(order=symbol)
    if type(value) is str:
        return StudySettings(order=symbol, values=orders_from_text(value, place=document.value_place(path)))
    numbers = value if isinstance(value, list) else [value]
    if any(not isinstance(v, int) or isinstance(v, bool) for v in numbers):
        document.fail("[study] values must be whole numbers", 'write "2..12", [2, 4, 8] or 6', path)
    return StudySettings(order=symbol, values=check_orders(numbers, document.value_place(path)))
