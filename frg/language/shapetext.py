"""The shape of a regulator as text."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

from frg.errors import InputError, Place
from frg.language.grammar import parse
from frg.language.names import ELEMENTARY, NameTable, is_name

if TYPE_CHECKING:
    import sympy


def parse_custom_shape(text: str, parameters: Iterable[str], *, place: Place | None = None) -> sympy.Expr:
    """A regulator shape s(y) in `y` and the named parameters, for example "a*exp(-y)*(1+b*y)"."""
    where = place or Place(source="regulator")
    table = {"y": "variable"}
    for name in parameters:
        if not is_name(name) or name in table or name in ELEMENTARY or name in ("pi", "diff"):
            raise InputError(
                f"{name!r} cannot name a parameter of a regulator shape",
                remedy="use letters, digits and underscores, not y or a function's name",
                place=where,
            )
        table[name] = "parameter"
    names = NameTable(names=table, advice="give its value after the expression, as in custom:a*exp(-y),a=1")
    return parse(text, names=names, place=where)
