"""Text of an expression cut into tokens, with the column of each; ASCII only."""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass

from frg.errors import InputError, Place

LONGEST_TEXT = 8000
MOST_TOKENS = 3000
LONGEST_FRAGMENT = 60

_TOKEN = re.compile(
    r"(?P<number>(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[A-Za-z_][A-Za-z0-9_]*)"
    r"|(?P<operator>\*\*|[-+*/^(),])"
    r"|(?P<space>[ \t\r\n]+)"
)

# What an eye takes for ASCII, beyond what Unicode's own compatibility forms say.
_LOOK_ALIKES = dict(zip("аеорсхуіјѕһԁԛԝАВЕКМНОРСТХІЈЅ", "aeopcxyijshdqwABEKMHOPCTXIJS", strict=True)) | dict(
    zip("οΑΒΕΖΗΙΚΜΝΟΡΤΥΧνι", "oABEZHIKMNOPTYXvi", strict=True)
)
_LOOK_ALIKES |= {
    "−": "-",
    "–": "-",
    "—": "-",
    "·": "*",
    "×": "*",
    "⋅": "*",
    "∗": "*",
    "÷": "/",
    "∕": "/",
    "ˆ": "^",
}
_GREEK = re.compile(r"GREEK (?:SMALL|CAPITAL) LETTER ([A-Z]+)|GREEK ([A-Z]+) SYMBOL")
_HINTS = {
    "'": "write a derivative as diff(U(rho), rho)",
    "[": "use round brackets",
    "]": "use round brackets",
    "{": "use round brackets",
    "}": "use round brackets",
    "=": "give only the right-hand side",
    ".": "a dot only stands inside a number",
    "!": "write gamma(n + 1) for a factorial",
}


@dataclass(frozen=True)
class Token:
    """`kind` is "number", "name", "operator" or "end"; `start` and `stop` are offsets in the text."""

    kind: str
    text: str
    start: int
    stop: int


def place_of(text: str, start: int, stop: int, place: Place) -> Place:
    """The place of text[start:stop], where `place` is that of the first character of the text."""
    line, column = place.line, place.column or 1
    newlines = text.count("\n", 0, start)
    if newlines:
        line = None if line is None else line + newlines
        column = start - text.rfind("\n", 0, start)
    else:
        column += start
    fragment = text[start:stop] or text.strip()
    if len(fragment) > LONGEST_FRAGMENT:
        fragment = fragment[: LONGEST_FRAGMENT - 1] + "…"
    return Place(source=place.source, line=line, column=column, text=fragment)


def tokenize(text: str, place: Place) -> list[Token]:
    """All tokens of the text and an "end" token.

    Raises InputError for over-long text, characters outside ASCII and stray characters."""
    if len(text) > LONGEST_TEXT:
        raise InputError(
            f"the expression is {len(text)} characters long; at most {LONGEST_TEXT} are read",
            remedy="split it with [definitions]",
            place=place_of(text, 0, 20, place),
        )
    tokens: list[Token] = []
    position = 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        if match is None:
            raise _stray(text, position, place)
        if match.lastgroup != "space":
            tokens.append(Token(str(match.lastgroup), match.group(), match.start(), match.end()))
        position = match.end()
    if len(tokens) > MOST_TOKENS:
        raise InputError(
            f"the expression has {len(tokens)} parts; at most {MOST_TOKENS} are read",
            remedy="split it with [definitions]",
            place=place_of(text, 0, 20, place),
        )
    tokens.append(Token("end", "", len(text), len(text)))
    return tokens


def _stray(text: str, position: int, place: Place) -> InputError:
    character = text[position]
    where = place_of(text, position, position + 1, place)
    if character.isascii():
        shown = character if character.isprintable() else f"U+{ord(character):04X}"
        hint = _HINTS.get(character, "use numbers, names, + - * / ^ ( ) and commas")
        return InputError(f"unexpected character {shown!r}", remedy=hint, place=where)
    name = unicodedata.name(character, "no name")
    message = f"the character {character!r} (U+{ord(character):04X}, {name}) is not ASCII"
    raised = "^" if name.startswith("SUPERSCRIPT") else ""
    ascii_form = raised + (_LOOK_ALIKES.get(character) or unicodedata.normalize("NFKC", character))
    if ascii_form.isascii() and ascii_form.strip() and ascii_form.isprintable():
        message += f"; it resembles the ASCII {ascii_form!r}"
        return InputError(message, remedy=f"type {ascii_form!r} instead", place=where)
    greek = _GREEK.match(name)
    if greek:
        word = (greek[1] or greek[2]).lower()
        return InputError(message, remedy=f"spell the letter out: {word}", place=where)
    return InputError(message, remedy="use ASCII letters only", place=where)
