"""Bit-for-bit comparison of records."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import fields, is_dataclass

import numpy as np


def differences(a: object, b: object, *, ignoring: frozenset[str] = frozenset()) -> tuple[str, ...]:
    """Where two records differ, as dotted paths; empty where they agree to the last bit (NaN equals NaN of
    the same bits, -0.0 differs from 0.0). Fields named in `ignoring` are skipped at every level, for example
    {"seconds"}."""
    return tuple(_walk(a, b, "", ignoring))


def _walk(a: object, b: object, path: str, ignoring: frozenset[str]) -> Iterator[str]:
    if type(a) is not type(b):
        yield f"{path}: {type(a).__name__} against {type(b).__name__}"
    elif is_dataclass(a) and not isinstance(a, type):
        for f in fields(a):
            if f.name not in ignoring:
                yield from _walk(
                    getattr(a, f.name), getattr(b, f.name), f"{path}.{f.name}".lstrip("."), ignoring
                )
    elif isinstance(a, np.ndarray) and isinstance(b, np.ndarray):
        if (a.dtype, a.shape) != (b.dtype, b.shape) or a.tobytes() != b.tobytes():
            yield f"{path}: {a!r} against {b!r}"
    elif isinstance(a, dict) and isinstance(b, dict):
        if list(a) != list(b):
            yield f"{path}: keys {list(a)} against {list(b)}"
        else:
            for key in a:
                yield from _walk(a[key], b[key], f"{path}[{key!r}]", ignoring)
    elif isinstance(a, (list, tuple)) and isinstance(b, (list, tuple)):
        if len(a) != len(b):
            yield f"{path}: {len(a)} entries against {len(b)}"
        else:
            for index, (x, y) in enumerate(zip(a, b, strict=True)):
                yield from _walk(x, y, f"{path}[{index}]", ignoring)
    elif isinstance(a, (float, complex)) and isinstance(b, (float, complex)):
        if np.complex128(a).tobytes() != np.complex128(b).tobytes():
            yield f"{path}: {a!r} against {b!r}"
    elif a != b:
        yield f"{path}: {a!r} against {b!r}"
