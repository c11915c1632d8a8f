"""The contract of a store: one run, written step by step, read back as a `Run`."""

from __future__ import annotations

import abc
from collections.abc import Mapping, Sequence
from dataclasses import replace
from types import TracebackType
from typing import Self

from frg.errors import StoreError
from frg.records import Inputs, Run, Step, Track, Verdict
from frg.store import canonical


class AbstractStore(abc.ABC):
    """One run being written. Every concrete store behaves alike; a shared test says so.

    A store is made by the class method `create` (a new run without steps, status "running") or by the
    store's own way to resume. `append_step` and `set_results` commit before they return: what they were
    given is then safe. Where a commit fails the state before it stands, on disk and in memory, and the call
    may be repeated. Stores compute nothing. Use as a context manager, or `close()`; a run closed
    while "running" reads as "interrupted" from then on."""

    @property
    @abc.abstractmethod
    def location(self) -> str | None:
        """Path of the run file; None in memory."""

    @property
    @abc.abstractmethod
    def count(self) -> int:
        """Number of committed steps: the index the next step will have."""

    @abc.abstractmethod
    def append_step(self, step: Step) -> None:
        """Commit one more step. The run is "running" again, and tracks and verdict, which belong to a given
        list of steps, are dropped until `set_results`. Raises StoreError."""

    @abc.abstractmethod
    def set_results(self, *, tracks: Sequence[Track], verdict: Verdict | None, status: str) -> None:
        """Commit tracks, verdict and status ("running", "complete", "interrupted" or "failed"),
        in place of earlier ones. Raises StoreError."""

    @abc.abstractmethod
    def read(self) -> Run:
        """The run as committed. Raises StoreError."""

    @abc.abstractmethod
    def close(self) -> None:
        """Let go of the run; may be called again."""

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, traceback: TracebackType | None
    ) -> None:
        self.close()


def new_run(
    inputs: Inputs, *, command: str, created_utc: str, frg_version: str, packages: Mapping[str, str]
) -> Run:
    """A run without steps, in stored form. Raises StoreError for what cannot be stored."""
    return Run(
        inputs=canonical.inputs(inputs),
        command=canonical.text(command, "the command"),
        created_utc=canonical.text(created_utc, "the time of creation"),
        frg_version=canonical.text(frg_version, "the version"),
        packages={
            canonical.text(k, "a package"): canonical.text(v, f"version of {k}") for k, v in packages.items()
        },
        status="running",
    )


def with_step(run: Run, step: Step) -> Run:
    """`run` with one more step, in stored form."""
    return replace(run, steps=(*run.steps, canonical.step(step)), tracks=(), verdict=None, status="running")


def with_results(run: Run, *, tracks: Sequence[Track], verdict: Verdict | None, status: str) -> Run:
    """`run` with these results, in stored form."""
    return replace(
        run,
        tracks=tuple(canonical.track(t) for t in tracks),
        verdict=None if verdict is None else canonical.verdict(verdict),
        status=canonical.status(status),
    )


def closed_error(location: str | None) -> StoreError:
    """The error of writing to a store after `close()`."""
    return StoreError(
        f"the store of {location or 'a run in memory'} is closed", remedy="open the run again to resume it"
    )
