"""Names of run files, and finding runs again."""

from __future__ import annotations

import difflib
import os
import re
import unicodedata
from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import datetime
from pathlib import Path

from frg.errors import InputError, Place, StoreError
from frg.store import files, guard

SUFFIX = ".h5"
SLUG_LENGTH = 40
SHORT_SIGNATURE = 8


@dataclass(frozen=True, kw_only=True)
class RunSummary:
    """One line of a list of runs, from the root attributes alone. `status` is that of the run, "interrupted"
    where it is marked "running" without a live writer, and "unreadable" where `problem` tells why; all else
    is empty then."""

    path: Path
    status: str
    title: str = ""
    created_utc: str = ""
    command: str = ""
    frg_version: str = ""
    signature: str = ""
    step_count: int = 0
    problem: str | None = None


def run_path(folder: str | os.PathLike[str], title: str, signature: str, created_utc: str) -> Path:
    """folder/<date>-<time>-<title slug>-<short signature>.h5, numbered where that name is taken.

    `created_utc` is a time in ISO form, for example 2026-12-01T06:47:09Z. Raises InputError for any other
    text."""
    try:
        moment = datetime.fromisoformat(created_utc)
    except ValueError:
        raise InputError(
            f"{created_utc!r} is no time in ISO form", remedy="give a time like 2026-12-01T06:47:09Z"
        ) from None
    stem = f"{moment:%Y%m%d-%H%M%S}-{slug(title)}-{signature[:SHORT_SIGNATURE]}"
    path = Path(folder) / f"{stem}{SUFFIX}"
    number = 2
    while os.path.lexists(path):
        path = Path(folder) / f"{stem}-{number}{SUFFIX}"
        number += 1
    return path


def slug(title: str) -> str:
    """Lower-case letters, digits and single hyphens, at most SLUG_LENGTH; "run" where nothing is left."""
    ascii_title = unicodedata.normalize("NFKD", title).encode("ascii", "ignore").decode("ascii")
    words = re.sub(r"[^a-z0-9]+", "-", ascii_title.lower()).strip("-")
    return words[:SLUG_LENGTH].rstrip("-") or "run"


def list_runs(folder: str | os.PathLike[str]) -> list[RunSummary]:
    """All run files of a folder, oldest first; unreadable ones are listed with the reason. A folder that does
    not exist has no runs. Raises StoreError where the folder cannot be read. Changes nothing on disk."""
    summaries = [summary(path) for path in _run_files(folder)]
    return sorted(summaries, key=lambda s: (s.created_utc or _time_of_name(s.path), s.path.name))


def summary(path: Path) -> RunSummary:
    """The summary of one file; never raises for what is in the file."""
    try:
        with guard.opened(path, sealed=True, whole=False) as file:
            found = RunSummary(
                path=path,
                status=guard.text(file, "status"),
                title=guard.text(file, "title"),
                created_utc=guard.text(file, "created_utc"),
                command=guard.text(file, "command"),
                frg_version=guard.text(file, "frg_version"),
                signature=guard.text(file, "signature"),
                step_count=guard.whole(file, "step_count"),
            )
    except StoreError as error:
        return RunSummary(path=path, status="unreadable", problem=error.message)
    if found.status == "running" and not files.has_writer(path.resolve()):
        return replace(found, status="interrupted")
    return found


def find_run(text: str, folder: str | os.PathLike[str]) -> Path:
    """The run meant by `text`: a path, the name of a file in `folder` (with or without .h5), or the beginning
    of a name or of a signature that fits one run only.

    Raises InputError where nothing or more than one run fits, naming the nearest."""
    place = Place(text=text[:200])
    if not text or "\0" in text:
        raise InputError("no run is named", remedy="give a path, a name or the beginning of one", place=place)
    if _is_file(Path(text)):
        return Path(text)
    paths = _run_files(folder)
    by_name = {path.name: path for path in paths}
    for name in (text, text + SUFFIX):
        if name in by_name:
            return by_name[name]
    matches = [path for path in paths if path.name.startswith(text)]
    if not matches and re.fullmatch(r"[0-9a-f]{4,64}", text):
        matches = [path for path in paths if _has_signature(path, text)]
    if len(matches) == 1:
        return matches[0]
    if matches:
        raise InputError(
            f"{len(matches)} runs fit: {_listed(matches)}", remedy="give more of the name", place=place
        )
    near = difflib.get_close_matches(text, by_name, n=3, cutoff=0.3)
    remedy = (
        f"nearest: {', '.join(near)}" if near else f"list the runs with `frg runs`; {folder} has {len(paths)}"
    )
    raise InputError(f"no run of this name in {folder}", remedy=remedy, place=place)


def _listed(paths: Sequence[Path]) -> str:
    shown = ", ".join(path.name for path in paths[:5])
    return shown if len(paths) <= 5 else f"{shown}, ..."


def _has_signature(path: Path, start: str) -> bool:
    # The short signature in the name settles most cases without opening the file.
    short = re.search(r"-([0-9a-f]{8})(?:-\d+)?\.h5$", path.name)
    if short and not (short[1].startswith(start) or start.startswith(short[1])):
        return False
    if short and len(start) <= SHORT_SIGNATURE:
        return True
    return summary(path).signature.startswith(start)


def _run_files(folder: str | os.PathLike[str]) -> list[Path]:
    try:
        with os.scandir(folder) as entries:
            names = [e.name for e in entries if e.name.endswith(SUFFIX) and not e.name.startswith(".")]
    except FileNotFoundError:
        return []
    except OSError as error:
        raise files.os_error(folder, "listing the runs", error) from None
    return [Path(folder) / name for name in sorted(names)]


def _is_file(path: Path) -> bool:
    try:
        return path.is_file()
    except OSError:  # a text too long for a file name
        return False


def _time_of_name(path: Path) -> str:
    """The time in a file's name in the form of `created_utc`, so that unreadable files stand where they
    belong."""
    found = re.match(r"(\d{4})(\d\d)(\d\d)-(\d\d)(\d\d)(\d\d)", path.name)
    return "{}-{}-{}T{}:{}:{}".format(*found.groups()) if found else ""
