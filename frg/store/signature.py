"""The signature of a run: one text that changes whenever a number of the run could.

It covers the truncation file, the values of the parameters in force, the regulator with its parameters, and
the settings (search, tolerances, orders). It leaves out what cannot move a number: comments, layout, `title`
and `reference` of the file, the parameter table of the file where it is overridden by the values in force,
the command, the folder, the time.

The version of the package and of the libraries is left out on purpose: the signature says *which computation*
was asked for, so that two runs of it with different versions can be recognised as such and compared. The
versions stand beside it in every run file, and a run is resumed only by the version that began it.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import replace

from frg.records import Inputs
from frg.store import canonical


def signature(
    *,
    truncation_text: str,
    parameters: Mapping[str, str],
    regulator: str,
    regulator_parameters: Mapping[str, float],
    settings: Mapping[str, object],
) -> str:
    """sha256, in hexadecimal, over the canonical text of all that can change a number.

    `regulator` must name the shape completely: a custom shape by its expression. Settings may hold numbers,
    exact rationals, text, lists and dictionaries. Raises StoreError for a setting that has no plain form."""
    return hashlib.sha256(
        canonical_text(
            truncation_text=truncation_text,
            parameters=parameters,
            regulator=regulator,
            regulator_parameters=regulator_parameters,
            settings=settings,
        ).encode("utf-8")
    ).hexdigest()


def canonical_text(
    *,
    truncation_text: str,
    parameters: Mapping[str, str],
    regulator: str,
    regulator_parameters: Mapping[str, float],
    settings: Mapping[str, object],
) -> str:
    """The text the signature is taken over: JSON with sorted keys, floats by repr."""
    parts = {
        "truncation": truncation_content(truncation_text, frozenset(parameters)),
        "parameters": {name: str(value) for name, value in parameters.items()},
        "regulator": regulator,
        "regulator_parameters": {name: float(value) for name, value in regulator_parameters.items()},
        "settings": canonical.plain(settings, "the settings"),
    }
    return canonical.text(json.dumps(parts, ensure_ascii=False, sort_keys=True), "an input of the signature")


def truncation_content(text: str, given: frozenset[str]) -> str:
    """The content of a truncation file without comments and layout, in the sequence of the file (the sequence
    of running quantities decides the sequence of couplings). Text that is no TOML stands for itself."""
    import tomllib

    try:
        document = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError, ValueError):
        return text
    for key in ("title", "reference"):
        document.pop(key, None)
    parameters = document.get("parameters")
    if isinstance(parameters, dict) and given.issuperset(parameters):
        del document["parameters"]
    return json.dumps(document, ensure_ascii=False, default=str)


def signature_of(inputs: Inputs) -> str:
    """The signature that `inputs` should carry."""
    return signature(
        truncation_text=inputs.truncation_text,
        parameters=inputs.parameters,
        regulator=inputs.regulator,
        regulator_parameters=inputs.regulator_parameters,
        settings=inputs.settings,
    )


def signed(inputs: Inputs) -> Inputs:
    """`inputs` with the signature filled in."""
    return replace(inputs, signature=signature_of(inputs))


def input_differences(stored: Inputs, asked: Inputs) -> tuple[str, ...]:
    """What makes two signatures differ, one readable line a difference; empty where they agree."""
    lines: list[str] = []
    old = truncation_content(stored.truncation_text, frozenset(stored.parameters))
    new = truncation_content(asked.truncation_text, frozenset(asked.parameters))
    if old != new:
        lines.append(f"truncation file: {_first_difference(stored.truncation_text, asked.truncation_text)}")
    if stored.regulator != asked.regulator:
        lines.append(f"regulator: stored {stored.regulator}, asked {asked.regulator}")
    for what, a, b in (
        ("parameter", stored.parameters, asked.parameters),
        ("regulator parameter", stored.regulator_parameters, asked.regulator_parameters),
        (
            "setting",
            canonical.plain(stored.settings, "settings"),
            canonical.plain(asked.settings, "settings"),
        ),
    ):
        for name in sorted({*a, *b}):
            left, right = (_shown(side, name) for side in (a, b))
            if left != right:
                lines.append(f"{what} {name}: stored {left}, asked {right}")
    return tuple(lines)


def _first_difference(stored: str, asked: str) -> str:
    old, new = stored.splitlines(), asked.splitlines()
    for number in range(max(len(old), len(new))):
        a = old[number].strip() if number < len(old) else "(end)"
        b = new[number].strip() if number < len(new) else "(end)"
        if a != b:
            return f"first difference in line {number + 1}: stored {a[:80]!r}, asked {b[:80]!r}"
    return "same lines, read with different parameters"


def _shown(side: Mapping[str, object], name: str) -> str:
    return repr(side[name])[:80] if name in side else "(absent)"
