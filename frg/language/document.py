"""A TOML text with the places of its keys: reading, decoding, typed access; errors name the place."""

from __future__ import annotations

import os
import re
import stat
import tomllib
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any, NoReturn

from frg.errors import InputError, NotYet, Place
from frg.language.names import nearest, suggestion
from frg.language.toml_places import Path, Spot, find_places

LARGEST_FILE = 256 * 1024  # bytes; a truncation fits on a page
_PLACE_IN_MESSAGE = re.compile(r"\s*\(at (?:line (\d+), column (\d+)|end of document)\)")


class Decimal(str):
    """The text of a TOML float, kept so that 0.1 stays 1/10."""


@dataclass(frozen=True)
class Document:
    """The decoded tables, the spots of the keys, and the name of the source."""

    tables: dict[str, Any]
    spots: dict[Path, Spot]
    source: str

    def key_place(self, path: Path) -> Place:
        """The place of a key; of the nearest enclosing table where the key itself has none."""
        for length in range(len(path), 0, -1):
            spot = self.spots.get(path[:length])
            if spot is not None:
                return Place(source=self.source, line=spot.key_line, column=spot.key_column, text=path[length - 1])
        return Place(source=self.source, text=path[-1] if path else None)

    def value_place(self, path: Path) -> Place:
        """The place of a value's first character."""
        spot = self.spots.get(path)
        if spot is None:
            return self.key_place(path)
        value = self.get(path)
        shown = None if isinstance(value, dict) else str(value)[:60]
        return Place(source=self.source, line=spot.line, column=spot.column, text=shown)

    def get(self, path: Path) -> Any:
        """The value at a path, None where there is none."""
        found: Any = self.tables
        for part in path:
            if not isinstance(found, dict) or part not in found:
                return None
            found = found[part]
        return found

    def fail(self, message: str, remedy: str, path: Path, *, key: bool = False) -> NoReturn:
        raise InputError(message, remedy=remedy, place=self.key_place(path) if key else self.value_place(path))

    def table(self, path: Path) -> dict[str, Any]:
        """The table at a path, {} where there is none."""
        value = self.get(path)
        if value is None:
            return {}
        if not isinstance(value, dict):
            self.fail(f"{shown(path)} must be a table", f"write [{'.'.join(path)}] and keys below it", path)
        return value

    def string(self, path: Path, example: str) -> str:
        value = self.get(path)
        if type(value) is not str:
            self.fail(f"{shown(path)} must be text in quotes", f"write {path[-1]} = {example}", path)
        return str(value)

    def check_keys(self, path: Path, known: Iterable[str], not_yet: dict[str, str] | None = None) -> None:
        """Refuse unknown keys of the table at `path`; keys in `not_yet` get their own answer."""
        later, allowed = not_yet or {}, tuple(known)
        for key in self.table(path):
            here = (*path, key)
            if key in later:
                raise NotYet(f"{shown(here)} is not supported yet", remedy=later[key], place=self.key_place(here))
            if key not in allowed:
                inside = f" in [{'.'.join(path)}]" if path else ""
                self.fail(
                    f"unknown key {key!r}{inside}",
                    suggestion(key, [*allowed, *later], "remove it"),
                    here,
                    key=True,
                )

    def choice(self, path: Path, choices: Iterable[str], default: str) -> str:
        allowed = tuple(choices)
        value = self.get(path)
        if value is None:
            return default
        if value not in allowed or type(value) is not str:
            match = nearest(str(value), allowed)
            remedy = f"did you mean {match!r}? " if match else ""
            self.fail(
                f"{shown(path)} is {value!r}",
                f"{remedy}Possible: " + ", ".join(f'"{c}"' for c in allowed),
                path,
            )
        return str(value)


def shown(path: Path) -> str:
    """A path as a reader of the file would say it: `[running] U.order`."""
    if len(path) == 1:
        return path[0]
    return f"[{path[0]}] " + ".".join(path[1:])


def load_document(text: str, source: str) -> Document:
    """Decode TOML text. Raises InputError with the place for anything that is not TOML."""
    if len(text) > LARGEST_FILE:
        raise _too_large(len(text), source)
    if not text.strip():
        raise InputError("the file is empty", remedy="write a truncation into it", place=Place(source=source))
    try:
        tables = tomllib.loads(text, parse_float=Decimal)
    except RecursionError:
        raise InputError(
            "brackets are nested too deeply",
            remedy="a truncation needs two levels",
            place=Place(source=source),
        ) from None
    except ValueError as error:
        raise _not_toml(error, text, source) from None
    return Document(tables, find_places(text), source)


def _not_toml(error: ValueError, text: str, source: str) -> InputError:
    message = str(error)
    lines = text.splitlines()
    match = _PLACE_IN_MESSAGE.search(message)
    remedy = "check quotes, brackets and the key = value form near here"
    if match is None:
        return InputError(f"not readable as TOML: {message}", remedy=remedy, place=Place(source=source))
    message = message[: match.start()]
    if match[1] is None:
        line, column = len(lines), len(lines[-1]) + 1
        remedy = "the file seems to be cut off: close what is open at its end"
    else:
        line, column = int(match[1]), int(match[2])
    offending = lines[line - 1].strip()[:80] if 0 < line <= len(lines) else None
    if "overwrite" in message.lower() or "twice" in message.lower():
        remedy = "a key or table may stand only once; remove or rename one"
    return InputError(
        f"not readable as TOML: {message[:1].lower() + message[1:]}",
        remedy=remedy,
        place=Place(source=source, line=line, column=column, text=offending or None),
    )


def _too_large(size: int, source: str) -> InputError:
    return InputError(
        f"the file has {size} bytes; at most {LARGEST_FILE} are read",
        remedy="give a truncation file, not data",
        place=Place(source=source),
    )


def read_text(path: str | os.PathLike[str]) -> str:
    """The UTF-8 text of a small regular file. The size is looked at before anything is read.

    Raises InputError for a directory, device, missing, unreadable, over-long or undecodable file."""
    source = os.fspath(path)
    place = Place(source=source)
    try:
        information = os.stat(path)
        if stat.S_ISDIR(information.st_mode):
            raise InputError("this is a directory, not a file", remedy="name the truncation file in it", place=place)
        if not stat.S_ISREG(information.st_mode):
            raise InputError("this is not a regular file", remedy="name a truncation file", place=place)
        if information.st_size > LARGEST_FILE:
            raise _too_large(information.st_size, source)
        with open(path, "rb") as file:
            data = file.read(LARGEST_FILE + 1)
    except FileNotFoundError:
        raise InputError("there is no such file", remedy=_neighbour(source), place=place) from None
    except PermissionError:
        raise InputError("no permission to read the file", remedy="change its access rights", place=place) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(f"the file cannot be read: {reason}", remedy="check the name", place=place) from None
    if len(data) > LARGEST_FILE:
        raise _too_large(len(data), source)
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        column = error.start - data.rfind(b"\n", 0, error.start)
        raise InputError(
            f"the file is not UTF-8 text (byte 0x{data[error.start]:02x})",
            remedy="save it as UTF-8",
            place=Place(source=source, line=line, column=column),
        ) from None


def _neighbour(source: str) -> str:
    folder = os.path.dirname(source) or "."
    try:
        names = [n for n in os.listdir(folder)[:2000] if n.endswith(".toml")]
    except (OSError, ValueError):
        return "check the path"
    match = nearest(os.path.basename(source), names)
    return f"did you mean {os.path.join(os.path.dirname(source), match)}?" if match else "check the path"
