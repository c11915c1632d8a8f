"""Where the shipped truncations are: installed with the package, or in the checkout."""

from __future__ import annotations

from pathlib import Path


def shelf_folder() -> Path | None:
    """The folder of shipped truncations, or None if there is none."""
    package = Path(__file__).resolve().parent.parent
    for folder in (package / "truncations", package.parent / "truncations"):
        if folder.is_dir():
            return folder
    return None


def shelf_path(name: str) -> Path | None:
    """A shipped truncation by file name."""
    folder = shelf_folder()
    if folder is None or Path(name).name != name:
        return None
    path = folder / name
    return path if path.is_file() else None


def shelf_files() -> list[Path]:
    folder = shelf_folder()
    return sorted(folder.glob("*.toml")) if folder else []
