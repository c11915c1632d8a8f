"""The memory twin of the run file: the same contract without a file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Self, final

from frg.records import Inputs, Run, Step, Track, Verdict
from frg.store.base import AbstractStore, closed_error, new_run, with_results, with_step


@final
class MemoryStore(AbstractStore):
    """A run kept in memory, for `--no-save`, notebooks and tests."""

    def __init__(self, run: Run):
        self._run = run
        self._open = True

    @classmethod
    def create(
        cls, inputs: Inputs, *, command: str, created_utc: str, frg_version: str, packages: Mapping[str, str]
    ) -> Self:
        """A new run without steps. Raises StoreError for what no store could hold."""
        return cls(
            new_run(
                inputs, command=command, created_utc=created_utc, frg_version=frg_version, packages=packages
            )
        )

    @property
    def location(self) -> None:
        return None

    @property
    def count(self) -> int:
        return len(self._run.steps)

    def append_step(self, step: Step) -> None:
        self._commit(with_step(self._run, step))

    def set_results(self, *, tracks: Sequence[Track], verdict: Verdict | None, status: str) -> None:
        self._commit(with_results(self._run, tracks=tracks, verdict=verdict, status=status))

    def read(self) -> Run:
        if not self._open and self._run.status == "running":
            return replace(self._run, status="interrupted")
        return self._run

    def close(self) -> None:
        self._open = False

    def _commit(self, run: Run) -> None:
        if not self._open:
            raise closed_error(None)
        self._run = run
