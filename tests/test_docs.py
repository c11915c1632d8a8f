"""Every command shown in the documentation is a command that works, and shows what it prints.

A block is runnable when it is fenced as `console`. Its lines `$ frg ...` are run, in a folder with the
shipped truncations, one document after the other. A comment `<!-- slow -->` before a block leaves its commands
to the argument parser; `<!-- file: NAME -->` before a block of another kind writes it to a file first. A shown line must
be among the printed ones with the same words and the same numbers of six and more digits, to three units of
the last digit shown; shorter ones beside them (residuals, condition numbers, counts of roots) depend on the machine and are
not compared. A line without such a number must be printed as it stands, decimal numbers aside.
"""

from __future__ import annotations

import re
import runpy
import shlex
import shutil
from dataclasses import dataclass
from pathlib import Path

import pytest

from frg.cli.main import main
from frg.cli.options import build_parser

ROOT = Path(__file__).resolve().parent.parent
DOCUMENTS = [ROOT / "README.md", ROOT / "DEVELOPERS.md", *sorted((ROOT / "docs").glob("*.md"))]
FENCE = re.compile(r"(?:^<!-- ([^\n]*) -->\n+)?^```(\w+)\n(.*?)^```$", re.MULTILINE | re.DOTALL)
WORD = re.compile(r"[A-Za-z_]+")
NUMBER = re.compile(r"(?<![\w.])[-+]?\d+(?:\.\d+)?(?:e[-+]?\d+)?(?![\w.]*[A-Za-z])")
DECIMAL = re.compile(r"\d+\.\d+(?:e[-+]?\d+)?|\d+e[-+]?\d+")
DIGITS = 6
ROUNDING = 1e-8


@dataclass(frozen=True)
class Block:
    marks: str
    kind: str
    text: str

    @property
    def commands(self) -> list[tuple[list[str], list[str]]]:
        """(arguments after `frg`, lines shown) of every command."""
        found: list[tuple[list[str], list[str]]] = []
        for line in self.text.splitlines():
            if line.startswith("$ frg "):
                found.append((shlex.split(line[len("$ frg "):]), []))
            elif line.startswith("$ "):
                raise AssertionError(f"not a frg command: {line}")
            elif line.strip() and line.strip() != "...":
                found[-1][1].append(line)
        return found


def blocks(path: Path) -> list[Block]:
    text = path.read_text(encoding="utf-8")
    return [Block(m[1] or "", m[2], m[3]) for m in FENCE.finditer(text)]


def long_numbers(line: str) -> list[str]:
    """Numbers printed with at least six digits, leading zeros aside."""
    found = NUMBER.findall(line)
    return [n for n in found if len(re.sub(r"\D", "", n.split("e")[0]).lstrip("0")) >= DIGITS]


def agree(shown: str, real: str) -> bool:
    """Equal to three units of the last digit shown, or to what other rounding errors may do to a deep exponent."""
    mantissa, _, power = shown.partition("e")
    decimals = len(mantissa.partition(".")[2])
    unit = 10.0 ** (int(power or 0) - decimals)
    return abs(float(shown) - float(real)) <= max(3.5 * unit, ROUNDING * max(1.0, abs(float(shown))))


def words(line: str) -> list[str]:
    """The words of a line, without those that tell whether a search met a second root."""
    return [w for w in WORD.findall(line) if w not in ("none", "x")]


def settled(line: str) -> str:
    """The line without what depends on the machine: decimal numbers, and the kind of white space."""
    return " ".join(DECIMAL.sub("#", line).split())


def shows(shown: str, printed: str) -> bool:
    ours, theirs = long_numbers(shown), long_numbers(printed)
    if not ours:
        return settled(shown) == settled(printed)
    return words(shown) == words(printed) and len(ours) == len(theirs) and all(map(agree, ours, theirs))


def expected_exit(shown: list[str]) -> int:
    if any(line.startswith("frg: ") for line in shown):
        return 2
    return 1 if any(line.endswith(": none found") for line in shown) else 0


@pytest.fixture()
def workplace(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    shutil.copytree(ROOT / "truncations", tmp_path / "truncations")
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.mark.parametrize("path", DOCUMENTS, ids=lambda p: p.name)
def test_commands_print_what_is_shown(
    path: Path, workplace: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    for block in blocks(path):
        if block.marks.startswith("file: "):
            (workplace / block.marks.removeprefix("file: ")).write_text(block.text, encoding="utf-8")
        if block.kind != "console":
            continue
        for arguments, shown in block.commands:
            build_parser().parse_args(arguments)
            if "slow" in block.marks:
                continue
            code = main(arguments)
            streams = capsys.readouterr()
            printed = (streams.out + streams.err).splitlines()
            command = f"{path.name}: frg {shlex.join(arguments)}"
            assert code == expected_exit(shown), f"{command} gave {code}\n{streams.err}"
            for line in shown:
                assert any(shows(line, real) for real in printed), f"{command} does not print\n{line}"


def test_comparison_of_lines_can_fail() -> None:
    assert shows("theta  1.53949946, -0.65574594 1e-13", "theta 1.53949947, -0.65574593   4e-12")
    assert not shows("theta  1.53949946", "theta 1.53949956")
    assert not shows("theta  1.53949946", "eta 1.53949946")
    assert not shows("theta  1.53949946, 2.000001", "theta 1.53949946")
    assert shows("B  residual 1e-13, 1 relevant", "B residual 4.1e-12,  1 relevant")
    assert not shows("d_t U = L1*v_d", "d_t U = L2*v_d")
    assert long_numbers("0.000123, 1.5e-15, 0.0316480 and U12345678") == ["0.0316480"]


@pytest.mark.parametrize("path", DOCUMENTS, ids=lambda p: p.name)
def test_links_lead_somewhere(path: Path) -> None:
    for target in re.findall(r"\]\(([^)#]+)(?:#[^)]*)?\)", path.read_text(encoding="utf-8")):
        if not target.startswith("http"):
            assert (path.parent / target).exists(), f"{path.name} links to {target}"


def python_scripts() -> list[tuple[str, str]]:
    return [(p.name, b.text) for p in DOCUMENTS for b in blocks(p) if b.kind == "python" and b.marks == "run"]


@pytest.mark.parametrize("name, text", python_scripts(), ids=lambda v: v if v.endswith(".md") else "")
def test_python_scripts_end_at_a_known_number(name: str, text: str, workplace: Path) -> None:
    assert "assert" in text.splitlines()[-1]
    script = workplace / "script.py"
    script.write_text(text, encoding="utf-8")
    runpy.run_path(str(script))
