"""Expressions and truncations as text that reads back equal."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterable
from typing import TYPE_CHECKING

from frg.errors import InputError
from frg.language.gravity import Gravity
from frg.language.truncation import (
    Grid,
    RegulatorChoice,
    RunningCoupling,
    RunningFunction,
    ScalarField,
    Truncation,
    WaveFunction,
)
from frg.language.wording import expression_text

if TYPE_CHECKING:
    import sympy


def to_text(truncation: Truncation) -> str:
    """The truncation as a TOML file, with the parameters in force; reading it gives an equal `Truncation`."""
    import sympy

    blocks = [[f"title = {_string(truncation.title)}"]]
    if truncation.reference is not None:
        blocks[0].append(f"reference = {_string(truncation.reference)}")
    space = [f'geometry = "{truncation.geometry}"']
    if truncation.dimension is not sympy.nan:
        space.insert(0, f"dimension = {_value(truncation.dimension)}")
    blocks.append(["[space]", *space])
    blocks.append(["[parameters]", *_pairs(truncation.parameters.items())])
    fields = [_field(f) for f in truncation.fields]
    if truncation.gravity is not None:
        fields.append(f'{truncation.gravity.metric} = "metric"')
    blocks.append(["[fields]", *fields])
    blocks.append(["[definitions]", *_pairs(truncation.definitions.items())])
    blocks.append(["[running]", *(_running(r) for r in truncation.running)])
    if truncation.lagrangian is not None:
        blocks.append(["[action]", f"lagrangian = {_quoted(truncation.lagrangian)}"])
    if truncation.flow is not None:
        blocks.append(["[flow]", *(f"{name} = {_quoted(e)}" for name, e in truncation.flow.items())])
    if truncation.gravity is not None:
        blocks.append(["[gravity]", *_gravity(truncation.gravity)])
    blocks.append(["[regulator]", *_regulator(truncation.regulator)])
    study = [f"order = {_string(truncation.study.order)}"]
    if truncation.study.values:
        study.append(f"values = [{', '.join(str(v) for v in truncation.study.values)}]")
    blocks.append(["[study]", *study])
    written = [block for block in blocks if len(block) > 1 or not block[0].startswith("[")]
    return "\n\n".join("\n".join(block) for block in written) + "\n"


def canonical_text(truncation: Truncation) -> str:
    """Text that is the same for truncations that mean the same: layout, comments, title, reference and the
    default orders of the study (which the run states itself) are left out; for signatures."""
    study = dataclasses.replace(truncation.study, values=())
    return to_text(dataclasses.replace(truncation, title="", reference=None, study=study))


def _pairs(items: Iterable[tuple[str, sympy.Expr]]) -> list[str]:
    return [f"{name} = {_value(e)}" for name, e in items]


def _value(e: sympy.Expr) -> str:
    return str(int(e)) if e.is_Integer and abs(e) < 2**63 else _quoted(e)


def _quoted(e: sympy.Expr) -> str:
    return f'"{expression_text(e)}"'


def _string(text: str) -> str:
    """A TOML basic string on one line."""
    short = {"\\": "\\\\", '"': '\\"', "\n": "\\n", "\r": "\\r", "\t": "\\t"}
    parts = []
    for character in text:
        code = ord(character)
        if character in short:
            parts.append(short[character])
        elif code < 32 or code == 127:
            parts.append(f"\\u{code:04X}")
        elif 0xD800 <= code < 0xE000:
            raise InputError(f"{text!r} is no Unicode text", remedy="remove the lone surrogate")
        else:
            parts.append(character)
    return '"' + "".join(parts) + '"'


def _point(point: sympy.Expr | str) -> str:
    return f'"{point}"' if isinstance(point, str) else _value(point)


def _field(scalar: ScalarField) -> str:
    if scalar.components == 1:
        return f'{scalar.name} = "scalar"'
    return f'{scalar.name} = {{ kind = "scalar", components = {_value(scalar.components)} }}'


def _running(quantity: RunningFunction | RunningCoupling | WaveFunction) -> str:
    if isinstance(quantity, RunningCoupling):
        return f'{quantity.name} = {{ kind = "coupling" }}'
    if isinstance(quantity, WaveFunction):
        entries = ['kind = "wave-function"', f'mode = "{quantity.mode}"', f"at = {_point(quantity.at)}"]
        return f"{quantity.name} = {{ {', '.join(entries)} }}"
    of = ", ".join(f'"{name}"' for name in quantity.of)
    entries = ['kind = "function"', f"of = {of if len(quantity.of) == 1 else f'[{of}]'}"]
    if quantity.about is not None:
        entries.append(f"about = {_point(quantity.about)}")
    if quantity.order is not None:
        entries.append(f"order = {_value(quantity.order)}")
    if quantity.grid is not None:
        entries.append(_grid(quantity.grid))
    entries.append(f'coefficients = "{quantity.coefficients}"')
    return f"{quantity.name} = {{ {', '.join(entries)} }}"


def _grid(grid: Grid) -> str:
    return f"grid = {{ points = {grid.points}, upto = {float(grid.upto)!r} }}"


def _gravity(gravity: Gravity) -> list[str]:
    gauge = gravity.gauge
    alpha_beta = f"{{ alpha = {_value(gauge.alpha)}, beta = {_value(gauge.beta)} }}" if gauge.beta is not None else '"harmonic"'
    return [
        f"gauge = {alpha_beta}",
        f'cutoff = "{gravity.cutoff}"',
        f"endomorphism = {{ {', '.join(_pairs(gravity.endomorphism.items()))} }}",
        f'parametrisation = "{gravity.parametrisation}"',
        f'approximation = "{"one-loop" if gravity.one_loop else "full"}"',
        f"matter = {{ {', '.join(_pairs(gravity.matter.items()))} }}",
    ]


def _regulator(choice: RegulatorChoice) -> list[str]:
    lines = [f"shape = {_string(choice.name)}"]
    if choice.expression is not None:
        lines.append(f"expression = {_string(choice.expression)}")
    return lines + [f"{name} = {float(value)!r}" for name, value in choice.parameters.items()]
