"""Shared fixtures. jax is loaded through the project's own loader, so that tests run in 64-bit floats."""

from __future__ import annotations

from pathlib import Path

import pytest

from frg.language.reader import read_truncation_text
from frg.language.truncation import Truncation

SHELF = Path(__file__).resolve().parent.parent / "truncations"


@pytest.fixture(scope="session")
def shelf() -> Path:
    """The folder of shipped truncations."""
    return SHELF


def scalar_text(
    *, components: str = "1", about: str = '"minimum"', wave: bool = False, grid: bool = False, extra: str = ""
) -> str:
    """A truncation file of one scalar multiplet with a potential U(rho)."""
    where = "grid = { points = 40, upto = 6.0 }" if grid else f'about = {about}, order = "n"'
    z = 'Z = { kind = "wave-function" }' if wave else ""
    return f"""
title = "test scalar"
[space]
dimension = "d"
[parameters]
d = 3
N = 1
[fields]
phi = {{ kind = "scalar", components = "{components}" }}
[definitions]
rho = "phi^2/2"
[running]
U = {{ kind = "function", of = "rho", {where} }}
{z}
[action]
lagrangian = "{'Z' if wave else '1'}/2*d(phi,mu)^2 + U(rho)"
{extra}
[study]
order = "n"
values = "2..8"
"""


def scalar(
    *, components: str = "1", about: str = '"minimum"', wave: bool = False, grid: bool = False,
    overrides: dict[str, str] | None = None,
) -> Truncation:
    text = scalar_text(components=components, about=about, wave=wave, grid=grid)
    if components == "1":
        text = text.replace("N = 1\n", "")
    if grid:
        text = text[: text.index("[study]")]
    return read_truncation_text(text, source="test.toml", overrides=overrides)
