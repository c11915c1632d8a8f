"""Small texts that files and the command line share: order ranges and regulator specifications."""

from __future__ import annotations

import itertools
import math
import re

from frg.errors import InputError, Place
from frg.language.algebra import Refused, constant_value
from frg.language.grammar import parse
from frg.language.names import NameTable, is_name
from frg.language.truncation import RegulatorChoice

HIGHEST_ORDER = 1000
MOST_ORDERS = 500
_RANGE = re.compile(r"\s*(\d{1,6})\s*(?:\.\.\s*(\d{1,6})\s*(?::\s*(\d{1,6})\s*)?)?")
_RANGE_REMEDY = 'write a range "2..12", a range with a step "2..12:2", numbers "2,4,8", or one number'
_SPEC_REMEDY = "write NAME or NAME:parameter=value,… , for example exponential:alpha=2 or custom:a*exp(-y),a=1"


def orders_from_text(text: str, *, place: Place | None = None) -> tuple[int, ...]:
    """The orders that "2..12", "2..12:2", "2,4,8" or "6" stands for, rising.

    Raises InputError for anything else, empty ranges and orders beyond 1000."""
    where = _with_text(place, "--orders", text)
    values: list[int] = []
    for part in text[:4000].split(","):
        match = _RANGE.fullmatch(part)
        if match is None or not part.isascii():
            raise InputError(f"{part.strip()!r} is no order or range of orders", remedy=_RANGE_REMEDY, place=where)
        first = int(match[1])
        last = int(match[2]) if match[2] else first
        step = int(match[3]) if match[3] else 1
        if step == 0:
            raise InputError("the step of the orders is 0", remedy=_RANGE_REMEDY, place=where)
        if last < first:
            raise InputError(
                f"the range of orders {first}..{last} is empty", remedy=f"write {last}..{first}", place=where
            )
        if last > HIGHEST_ORDER:
            raise InputError(f"order {last} is above {HIGHEST_ORDER}", remedy="lower it", place=where)
        values.extend(range(first, last + 1, step))
    return check_orders(values, where)


def check_orders(values: list[int], place: Place) -> tuple[int, ...]:
    """The orders as a tuple; refused unless they rise, within bounds."""
    if not values:
        raise InputError("the list of orders is empty", remedy=_RANGE_REMEDY, place=place)
    if len(values) > MOST_ORDERS:
        raise InputError(f"{len(values)} orders are too many", remedy=f"give at most {MOST_ORDERS}", place=place)
    if min(values) < 0 or max(values) > HIGHEST_ORDER:
        raise InputError(f"orders run from 0 to {HIGHEST_ORDER}", remedy="change the values", place=place)
    if any(b <= a for a, b in itertools.pairwise(values)):
        raise InputError("the orders must rise, each standing once", remedy="sort them", place=place)
    return tuple(values)


def number_from_text(text: str, *, place: Place) -> float:
    """A finite double from a decimal or a constant expression ("2.7", "1/3", "sqrt(2)")."""
    expression = parse(text, names=NameTable(advice="a number is wanted here"), place=place)
    try:
        value = constant_value(expression)
    except Refused as refusal:
        raise InputError(refusal.message, remedy=refusal.remedy, place=place) from None
    if value is None or not math.isfinite(value):
        raise InputError(f"{text!r} is no finite number", remedy="give a number such as 2.7 or 1/3", place=place)
    return value


def regulator_choice_from_text(text: str, *, place: Place | None = None) -> RegulatorChoice:
    """The choice that "flat", "exponential:alpha=2" or "custom:a*exp(-y)*(1+b*y),a=1,b=0.1" names.

    Only the form is checked; whether the shape exists and has these parameters is for `frg.regulator`."""
    where = _with_text(place, "--regulator", text)
    if len(text) > 4000:
        raise InputError("the regulator specification is too long", remedy=_SPEC_REMEDY, place=where)
    name, colon, rest = text.partition(":")
    name = name.strip()
    if not is_name(name):
        raise InputError(f"{name!r} is no name of a regulator", remedy=_SPEC_REMEDY, place=where)
    if name != "custom":
        if colon and not rest.strip():
            raise InputError("nothing follows the colon", remedy=_SPEC_REMEDY, place=where)
        return RegulatorChoice(name=name, parameters=_assignments(rest.split(",") if colon else [], where))
    expression, *assignments = _split_outside_brackets(rest)
    if not expression.strip():
        raise InputError("a custom regulator needs its shape", remedy=_SPEC_REMEDY, place=where)
    return RegulatorChoice(name=name, parameters=_assignments(assignments, where), expression=expression.strip())


def _assignments(parts: list[str], place: Place) -> dict[str, float]:
    found: dict[str, float] = {}
    for part in parts:
        key, equals, value = part.partition("=")
        key = key.strip()
        if not equals or not is_name(key):
            raise InputError(f"{part.strip()!r} is not of the form parameter=value", remedy=_SPEC_REMEDY, place=place)
        if key in found:
            raise InputError(f"the parameter {key} is given twice", remedy="remove one", place=place)
        if key in ("shape", "expression", "y"):
            raise InputError(f"{key!r} cannot name a parameter", remedy="choose another name", place=place)
        # without a column: that of the whole text is known at best
        found[key] = number_from_text(value.strip(), place=Place(source=place.source, line=place.line))
    return found


def _split_outside_brackets(text: str) -> list[str]:
    parts, depth, start = [], 0, 0
    for i, character in enumerate(text):
        depth += (character == "(") - (character == ")")
        if character == "," and depth <= 0:
            parts.append(text[start:i])
            start = i + 1
    return [*parts, text[start:]]


def _with_text(place: Place | None, source: str, text: str) -> Place:
    given = place or Place(source=source)
    return Place(source=given.source, line=given.line, column=given.column, text=text[:80] or None)
