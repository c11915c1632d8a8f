"""The one place that imports jax, and sees to what must hold before and after that import."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any, NamedTuple


class Jax(NamedTuple):
    """The modules `jax`, `jax.numpy` and `jax.lax`."""

    jax: Any
    numpy: Any
    lax: Any


def load() -> Jax:
    """Import jax once, with 64-bit floats and a compilation cache in the user's cache folder.

    jax 0.10 can deadlock in batched calls when its thread pool has exactly two threads, so NPROC is
    set to at least three before the import unless the user has set it. 64-bit floats are switched on
    here because every entry point that computes comes through here."""
    os.environ.setdefault("NPROC", str(max(3, os.cpu_count() or 1)))
    import jax
    import jax.numpy
    from jax import lax

    jax.config.update("jax_enable_x64", True)
    _use_cache(jax)
    return Jax(jax, jax.numpy, lax)


def cache_folder() -> Path:
    """FRG_CACHE if set, else the user's cache folder (XDG_CACHE_HOME, or ~/.cache) / frg."""
    named = os.environ.get("FRG_CACHE")
    if named:
        return Path(named)
    base = os.environ.get("XDG_CACHE_HOME")
    return (Path(base) if base else Path.home() / ".cache") / "frg"


def _use_cache(jax: Any) -> None:
    """Point jax's persistent compilation cache at our folder; without a writable folder do without."""
    if jax.config.jax_compilation_cache_dir is not None:
        return
    folder = cache_folder() / "compiled"
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError:
        return
    jax.config.update("jax_compilation_cache_dir", str(folder))
    jax.config.update("jax_persistent_cache_min_compile_time_secs", 0.0)
    jax.config.update("jax_persistent_cache_min_entry_size_bytes", -1)
