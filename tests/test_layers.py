"""Imports run one way, and nothing turns text into code."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

PACKAGE = Path(__file__).resolve().parent.parent / "frg"

ALLOWED: dict[str, set[str]] = {
    "errors": set(),
    "records": {"errors"},
    "language": {"errors", "records"},
    "regulator": {"errors", "records", "language"},
    "derive": {"errors", "records", "language", "regulator"},
    "evaluate": {"errors", "records", "language", "regulator", "derive"},
    "solve": {"errors", "records", "language", "regulator", "derive", "evaluate"},
    "study": {"errors", "records", "language", "regulator", "derive", "evaluate", "solve"},
    "store": {"errors", "records"},
    "show": {"errors", "records", "store"},
}
EVERYTHING = {*ALLOWED, "cli"}
FORBIDDEN = {"eval", "exec", "compile", "sympify", "parse_expr", "lambdify", "__import__"}


def modules() -> list[Path]:
    return sorted(PACKAGE.rglob("*.py"))


def part_of(path: Path) -> str:
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def imported_parts(path: Path) -> set[str]:
    """Parts of frg imported anywhere in a module, inside functions and for type checking too."""
    found = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        names = []
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"relative import in {path}"
            names = [node.module or ""] + [f"{node.module}.{alias.name}" for alias in node.names]
        found |= {name.split(".")[1] for name in names if name.startswith("frg.")}
    return {name for name in found if name in EVERYTHING}


@pytest.mark.parametrize("path", modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_run_one_way(path: Path) -> None:
    part = part_of(path)
    if part in ("__init__", "cli"):
        return
    assert imported_parts(path) <= ALLOWED[part] | {part}


@pytest.mark.parametrize("path", modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_text_never_becomes_code_and_modules_stay_small(path: Path) -> None:
    source = path.read_text(encoding="utf-8")
    assert source.count("\n") <= 420
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Call):
            called = node.func
            name = called.id if isinstance(called, ast.Name) else None
            assert name not in FORBIDDEN, f"{path}:{node.lineno} calls {name}"
        if isinstance(node, ast.Import | ast.ImportFrom):
            names = {alias.name for alias in node.names} | {getattr(node, "module", None)}
            assert not names & {"pickle", "marshal", "shelve", "dill"}, f"{path}:{node.lineno}"
            assert not {alias.name for alias in node.names} & FORBIDDEN, f"{path}:{node.lineno}"


@pytest.mark.parametrize(
    "module", ["frg.cli.main", "frg.cli.options", "frg.cli.shelf", "frg.store.naming", "frg.show.tables",
               "frg.show.plots", "frg.show.report", "frg.records", "frg.language.reader"]
)
def test_what_does_not_compute_imports_nothing_heavy(module: str) -> None:
    code = (
        f"import sys, {module}\n"
        "heavy = {'jax', 'sympy', 'scipy', 'matplotlib', 'h5py', 'flint', 'rich', 'jinja2'} & set(sys.modules)\n"
        "print(','.join(sorted(heavy)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60)
    assert done.stdout.strip() == ""
