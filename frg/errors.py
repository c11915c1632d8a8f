"""Exceptions and outcomes: everything that can go wrong, said once and with a remedy."""

from __future__ import annotations

import enum
from dataclasses import dataclass


class FrgError(Exception):
    """Base of all errors this package raises on purpose; `exit_code` is the shell's answer."""

    exit_code = 1


@dataclass(frozen=True)
class Place:
    """Where in the user's input an error sits: a file (or the name of a command-line option),
    a line and a column (both counted from 1), and the offending text. Unknown parts are None."""

    source: str | None = None
    line: int | None = None
    column: int | None = None
    text: str | None = None

    def __str__(self) -> str:
        parts = [str(p) for p in (self.source, self.line, self.column) if p is not None]
        return ":".join(parts)


class InputError(FrgError):
    """Bad input: one message that names the place, the value and the remedy. Exit code 2."""

    exit_code = 2

    def __init__(self, message: str, *, remedy: str, place: Place | None = None):
        self.message = message
        self.remedy = remedy
        self.place = place or Place()
        super().__init__(message)

    def at(self, place: Place) -> InputError:
        """The same error at a place that became known further up; known parts are kept."""
        own = self.place
        merged = Place(
            source=own.source or place.source,
            line=own.line if own.line is not None else place.line,
            column=own.column if own.column is not None else place.column,
            text=own.text or place.text,
        )
        return type(self)(self.message, remedy=self.remedy, place=merged)

    def __str__(self) -> str:
        where = str(self.place)
        head = f"{where}: {self.message}" if where else self.message
        if self.place.text:
            head += f"\n    {self.place.text}"
        return f"{head}\n  remedy: {self.remedy}"


class NotYet(InputError):
    """Input that is understood but that this version cannot compute; the message names the key."""


class StoreError(InputError):
    """A run file that cannot be read, written or trusted."""


class SearchError(FrgError):
    """A search that ended without what it was asked for; carries the `Outcome`."""

    def __init__(self, outcome: Outcome, detail: str = ""):
        self.outcome = outcome
        self.detail = detail
        super().__init__(f"{outcome.word}: {detail + '. ' if detail else ''}{outcome.value}")


class Outcome(enum.Enum):
    """What became of a step. The value is the advice; `word` is the short form that is stored."""

    FOUND = "at least one fixed point was found and its residual re-measured"
    NONE_FOUND = (
        "no fixed point was found in the search region: widen the box, raise the number of "
        "starts, try a neighbouring order, dimension or regulator"
    )
    NOT_CONVERGED = (
        "the iteration stopped above its tolerance: start closer (continue from a solved "
        "case), raise the number of iterations, or lower the order"
    )
    NON_FINITE = (
        "the flow became infinite or undefined on the way: a regulated propagator has a pole "
        "near the start; start further from it or use another expansion point"
    )
    ILL_CONDITIONED = (
        "the linear systems lost all digits: lower the order, expand about the minimum, or use a grid"
    )

    @property
    def word(self) -> str:
        return self.name.lower().replace("_", " ")

    @classmethod
    def from_word(cls, word: str) -> Outcome:
        for member in cls:
            if member.word == word:
                return member
        raise ValueError(f"unknown outcome {word!r}")
