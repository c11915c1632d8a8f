"""Imports run one way, and nothing turns text into code."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
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


def imported_modules(source: str, *, late: bool = True) -> set[str]:
    """Dotted names imported anywhere in a module, for type checking too, and (unless `late` is false) inside
    functions. For `from a import b` both a and a.b are named, since b may be a module."""
    found: set[str] = set()
    for node in _nodes(ast.parse(source), late):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "relative import"
            found |= {node.module or ""} | {f"{node.module}.{alias.name}" for alias in node.names}
    return found


def _nodes(node: ast.AST, late: bool) -> Iterator[ast.AST]:
    for child in ast.iter_child_nodes(node):
        yield child
        if late or not isinstance(child, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda):
            yield from _nodes(child, late)


def imported_parts(source: str) -> set[str]:
    """Parts of frg among the imports; a part that the table does not know is an error."""
    names = {name.split(".")[1] for name in imported_modules(source) if name.startswith("frg.")}
    return names - {"__version__"}


def test_every_part_has_its_place_in_the_table() -> None:
    assert {part_of(path) for path in modules()} == {*EVERYTHING, "__init__"}


@pytest.mark.parametrize(
    "source",
    [
        "import frg.cli.main", "from frg import cli", "from frg.study import verdict",
        "def late():\n    from frg.store.hdf5 import read_run\n",
        "from typing import TYPE_CHECKING\nif TYPE_CHECKING:\n    from frg.show.tables import console\n",
        "try:\n    import frg.solve.newton as n\nexcept ImportError:\n    pass\n",
    ],
)
def test_an_arrow_that_runs_back_is_seen_wherever_it_hides(source: str) -> None:
    assert not imported_parts(source) <= ALLOWED["evaluate"] | {"evaluate"}


def test_modules_do_not_import_one_another_in_circles() -> None:
    """Imports that run when a module is loaded, and those for type checking."""
    names = {dotted(path): path for path in modules()}
    arrows = {
        name: (imported_modules(path.read_text(encoding="utf-8"), late=False) & names.keys()) - {name, "frg"}
        for name, path in names.items()
    }
    while free := [name for name, targets in arrows.items() if not targets & arrows.keys()]:
        for name in free:
            del arrows[name]
    assert not arrows, f"modules in circles, or behind them: {sorted(arrows)}"


def dotted(path: Path) -> str:
    parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


@pytest.mark.parametrize("path", modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_functions_stay_short(path: Path) -> None:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            assert node.end_lineno is not None
            length = node.end_lineno - node.lineno + 1
            assert length <= 60, f"{path}:{node.lineno}: {node.name} has {length} lines"


@pytest.mark.parametrize("path", modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_run_one_way(path: Path) -> None:
    part = part_of(path)
    if part in ("__init__", "cli"):
        return
    assert imported_parts(path.read_text(encoding="utf-8")) <= ALLOWED[part] | {part}


@pytest.mark.parametrize("path", modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_text_never_becomes_code_and_modules_stay_small(path: Path) -> None:
    source = path.read_text(encoding="utf-8")
    assert source.count("\n") <= 400
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Call):
            called = node.func
            name = called.id if isinstance(called, ast.Name) else None
            assert name not in FORBIDDEN, f"{path}:{node.lineno} calls {name}"
            method = called.attr if isinstance(called, ast.Attribute) else None
            assert method not in FORBIDDEN - {"compile"}, f"{path}:{node.lineno} calls .{method}"
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
