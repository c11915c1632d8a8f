"""Running the command line in process and as a subprocess."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from frg.cli.main import main


class Shell:
    """`shell(*arguments)` runs a command in process; the last output is kept."""

    def __init__(self, capsys: pytest.CaptureFixture[str]):
        self.capsys = capsys
        self.out = ""
        self.err = ""

    def __call__(self, *arguments: str) -> int:
        self.capsys.readouterr()
        code = main([str(a) for a in arguments])
        self.out, self.err = self.capsys.readouterr()
        return code

    def json(self) -> dict[str, Any]:
        found: dict[str, Any] = json.loads(self.out)
        return found


@pytest.fixture
def shell(capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Shell:
    """In an empty folder of its own."""
    monkeypatch.chdir(tmp_path)
    return Shell(capsys)


@pytest.fixture(scope="session")
def compile_cache(tmp_path_factory: pytest.TempPathFactory) -> dict[str, str]:
    """Environment of subprocesses: one compilation cache for all of them."""
    return {**os.environ, "FRG_CACHE": str(tmp_path_factory.mktemp("cache"))}


def spawn(arguments: list[str], environment: dict[str, str], folder: Path) -> subprocess.Popen[str]:
    """`frg ARGUMENTS` as a process of its own."""
    return subprocess.Popen(
        [sys.executable, "-m", "frg.cli", *arguments], env=environment, cwd=folder, text=True,
        stdout=subprocess.PIPE, stderr=subprocess.PIPE,
    )
