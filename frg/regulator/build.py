"""From the words of a file or of the command line to a regulator object."""

from __future__ import annotations

from dataclasses import fields

from frg.errors import InputError, Place
from frg.language.names import suggestion
from frg.language.truncation import RegulatorChoice
from frg.regulator.base import AbstractRegulator
from frg.regulator.shapes import Custom, Exponential, Flat, Gaussian, Mass, Power, Sharp, Theta

SHAPES: dict[str, type] = {
    "flat": Flat, "theta": Theta, "exponential": Exponential, "gaussian": Gaussian, "power": Power,
    "mass": Mass, "sharp": Sharp,
}


def regulator_names() -> dict[str, str]:
    """Every regulator by name, with one line on what it is."""
    lines = {name: (shape.__doc__ or "").split(";")[0].splitlines()[0].rstrip(".") for name, shape in SHAPES.items()}
    return lines | {"custom": "a positive, decaying expression in y and named parameters"}


def build_regulator(choice: RegulatorChoice) -> AbstractRegulator:
    """The regulator a choice describes. Raises InputError for an unknown name or parameter or a bad value."""
    if choice.expression is not None:
        return _custom(choice)
    if choice.name == "custom":
        raise InputError(
            "the regulator custom needs an expression",
            remedy="write it after the name, for example custom:a*exp(-y)*(1+b*y),a=1,b=0.1",
            place=Place(text=choice.name),
        )
    shape = SHAPES.get(choice.name)
    if shape is None:
        known = [*SHAPES, "custom"]
        raise InputError(
            f"unknown regulator {choice.name!r}",
            remedy=suggestion(choice.name, known, "use one of the known shapes"), place=Place(text=choice.name),
        )
    known = [f.name for f in fields(shape)]
    for name in choice.parameters:
        if name not in known:
            raise InputError(
                f"the regulator {choice.name} has no parameter {name!r}",
                remedy=suggestion(name, known, "leave it out"), place=Place(text=name),
            )
    built: AbstractRegulator = shape(**{name: float(value) for name, value in choice.parameters.items()})
    return built


def _custom(choice: RegulatorChoice) -> AbstractRegulator:
    from frg.language.shapetext import parse_custom_shape

    assert choice.expression is not None
    values = tuple((name, float(value)) for name, value in choice.parameters.items())
    expression = parse_custom_shape(choice.expression, [n for n, _ in values], place=Place(text=choice.expression))
    return Custom(expression=expression, values=values)
