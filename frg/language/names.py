"""Which names an expression may use, and the nearest known one to a name that is unknown."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

ELEMENTARY = ("sqrt", "exp", "log", "sin", "cos", "tan", "zeta", "gamma")

# A name with a fixed meaning in every expression; nothing in a file may be called so.
RESERVED = frozenset({*ELEMENTARY, "pi", "diff", "vd"})

# `d` and `l` may name a number (the dimension is usually called d), but not a function.
RESERVED_CALLS = frozenset({"d", "l"})

LORENTZ = ("mu", "nu", "rho", "sigma", "kappa", "lambda", "alpha", "beta")

LONGEST_NAME = 40
_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]*\Z")


@dataclass(frozen=True, kw_only=True)
class NameTable:
    """The names an expression may use.

    `names` are plain names, with the word for what each is ("parameter", "field", ...);
    `functions` are running functions with their number of arguments; `differentiable` are the names
    d(name, mu) may act on (empty: no derivative operator); `lorentz` the Lorentz names allowed
    there; `thresholds` allows l(n, w) and l(n, w, eta); `advice` says where a missing name is to
    be declared."""

    names: Mapping[str, str] = field(default_factory=dict)
    functions: Mapping[str, int] = field(default_factory=dict)
    differentiable: frozenset[str] = frozenset()
    lorentz: tuple[str, ...] = ()
    thresholds: bool = False
    advice: str = "use a known name"

    def callables(self) -> list[str]:
        """Every name that may stand before an opening bracket."""
        extra = ["d"] if self.differentiable else []
        if self.thresholds:
            extra.append("l")
        if self.functions:
            extra.append("diff")
        return [*self.functions, *ELEMENTARY, *extra]


def is_name(text: str) -> bool:
    """True for an ASCII letter followed by letters, digits and underscores, up to 40 characters."""
    return len(text) <= LONGEST_NAME and _NAME.match(text) is not None


def nearest(name: str, known: Iterable[str]) -> str | None:
    """The known name that a misspelt one most likely means, or None."""
    choices = sorted(set(known))
    for choice in choices:
        if choice.lower() == name.lower():
            return choice
    found = difflib.get_close_matches(name[:200], choices, n=1, cutoff=0.6)
    return found[0] if found else None


def suggestion(name: str, known: Iterable[str], otherwise: str) -> str:
    """A remedy for an unknown name: the nearest known one, and what is known."""
    choices = sorted(set(known))
    listed = ", ".join(choices[:20]) + (", …" if len(choices) > 20 else "")
    match = nearest(name, choices)
    if match is not None:
        return f"did you mean {match!r}? Otherwise {otherwise}" + (f" (known here: {listed})" if listed else "")
    return otherwise + (f" (known here: {listed})" if listed else "")


def listing(words: Iterable[str]) -> str:
    """`a, b or c` for messages."""
    items = list(words)
    return items[0] if len(items) == 1 else ", ".join(items[:-1]) + " or " + items[-1]
