"""The run file: one HDF5 file a run, replaced whole at every commit."""

from __future__ import annotations

import os
import stat
import uuid
from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Self, final

from frg.errors import Place, StoreError
from frg.records import Inputs, Run, Step, Track, Verdict
from frg.store import files, guard, layout, reading
from frg.store.base import AbstractStore, closed_error, new_run, with_results, with_step
from frg.store.signature import input_differences, signature_of

if TYPE_CHECKING:
    import h5py


@final
class HDF5Store(AbstractStore):
    """A run written to a file. Made by `create` or `open_for_resume`, which take the run's lock.

    An HDF5 image of the run is kept in memory and grows with each step, so that a commit costs one pass over
    the file's bytes, not one over all records. The image is never what counts: it is dropped and rebuilt from
    the committed records whenever a commit did not end as planned."""

    def __init__(self, path: Path, run: Run, lock: files.WriterLock):
        self._path = path
        self._run = run
        self._lock: files.WriterLock | None = lock
        self._image: h5py.File | None = None

    @classmethod
    def create(
        cls,
        path: str | os.PathLike[str],
        inputs: Inputs,
        *,
        command: str,
        created_utc: str,
        frg_version: str,
        packages: Mapping[str, str],
    ) -> Self:
        """A new run file without steps, on disk when this returns; missing folders are made.

        Raises StoreError if the path exists, cannot be written, or another writer holds it."""
        run = new_run(
            inputs, command=command, created_utc=created_utc, frg_version=frg_version, packages=packages
        )
        target = _absolute(path)
        try:
            target.parent.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise files.os_error(target.parent, "making the folder", error) from None
        lock = files.WriterLock(target)
        try:
            if os.path.lexists(target):
                what = "a folder" if target.is_dir() else "a file"
                raise StoreError(
                    f"{what} of this name exists already",
                    remedy="choose another name; run files are never overwritten",
                    place=Place(source=str(path)),
                )
            store = cls(target, run, lock)
            store._commit(run)
        except BaseException:
            lock.release()
            raise
        return store

    @property
    def location(self) -> str:
        return str(self._path)

    @property
    def count(self) -> int:
        return len(self._run.steps)

    def append_step(self, step: Step) -> None:
        self._commit(with_step(self._run, step))

    def set_results(self, *, tracks: Sequence[Track], verdict: Verdict | None, status: str) -> None:
        self._commit(with_results(self._run, tracks=tracks, verdict=verdict, status=status))

    def read(self) -> Run:
        return read_run(self._path)

    def close(self) -> None:
        self._drop_image()
        if self._lock is not None:
            self._lock.release()
            self._lock = None

    def _commit(self, run: Run) -> None:
        if self._lock is None:
            raise closed_error(self.location)
        before = self._run
        # From here to the end an interrupt may fall anywhere, even between the rename and the return. The new
        # run is taken as the state from the start, so that a later commit can only add to what reached the
        # disk.
        self._run = run
        try:
            data = self._serialised(run, before)
            files.replace_file(self._path, data)
        except StoreError:
            self._run = before
            self._drop_image()
            raise
        except BaseException:
            self._drop_image()
            raise

    def _serialised(self, run: Run, before: Run) -> bytes:
        with guard.translated(self._path, "written"):
            if self._image is None:
                self._image = _new_image(run)
            else:
                for index in range(len(before.steps), len(run.steps)):
                    layout.write_step(self._image, index, run.steps[index])
                layout.write_results(self._image, run)
            self._image.flush()
            return files.seal(self._image.id.get_file_image())

    def _drop_image(self) -> None:
        image, self._image = self._image, None
        if image is not None:
            image.close()


def _new_image(run: Run) -> h5py.File:
    import h5py

    # The library takes two open images of one name for one file, though neither ever reaches the disk.
    image = h5py.File(uuid.uuid4().hex, "w", driver="core", backing_store=False)
    try:
        layout.write_run(image, run)
    except BaseException:
        image.close()
        raise
    return image


def read_run(path: str | os.PathLike[str]) -> Run:
    """The run in a file, with its committed steps. A run marked "running" that no live process is writing
    reads as "interrupted". Raises StoreError for every file that is not a sound run file."""
    with guard.opened(path) as file:
        run = reading.read_run(file)
    if run.status == "running" and not files.has_writer(_absolute(path)):
        return replace(run, status="interrupted")
    return run


def open_for_resume(
    path: str | os.PathLike[str], *, inputs: Inputs | None = None, frg_version: str | None = None
) -> HDF5Store:
    """The store of a run file, positioned after its last committed step; the file is not touched until then.

    `inputs` are those of the computation that is to go on; where their signature differs from the stored one
    StoreError names what differs. `frg_version` likewise: one run is one version's work. Also raises
    StoreError where the file is damaged, changed by another program, marked read-only or being written."""
    target = _absolute(path)
    place = Place(source=str(path))
    files.read_bytes(target)  # a path that is no file at all gets its error before a lock file is made for it
    lock = files.WriterLock(target)
    try:
        with guard.opened(target, sealed=True) as file:
            run = reading.read_run(file)
        _check_writable(target, place)
        _check_inputs(run, inputs, place)
        if frg_version is not None and frg_version != run.frg_version:
            raise StoreError(
                f"the run was begun by version {run.frg_version}, this is {frg_version}",
                remedy="resume it with that version, or start a new run",
                place=place,
            )
    except BaseException:
        lock.release()
        raise
    return HDF5Store(target, run, lock)


def _check_inputs(run: Run, inputs: Inputs | None, place: Place) -> None:
    if signature_of(run.inputs) != run.inputs.signature:
        raise StoreError(
            "the stored signature does not belong to the stored inputs",
            remedy="start a new run: this file was changed after it was written",
            place=place,
        )
    if inputs is None or signature_of(inputs) == run.inputs.signature:
        return
    lines = input_differences(run.inputs, inputs)
    raise StoreError(
        "the run was made with other inputs:\n    " + "\n    ".join(lines),
        remedy="resume with the inputs of the run, or start a new run",
        place=place,
    )


def _check_writable(path: Path, place: Place) -> None:
    try:
        writable = os.stat(path).st_mode & (stat.S_IWUSR | stat.S_IWGRP | stat.S_IWOTH)
    except OSError as error:
        raise files.os_error(path, "opening the run file", error) from None
    if not writable or not os.access(path, os.W_OK):
        raise StoreError(
            "the run file is read-only",
            remedy="make it writable (chmod u+w), or start a new run",
            place=place,
        )


def _absolute(path: str | os.PathLike[str]) -> Path:
    """The real path of the file: a rename must replace the run, not a symbolic link to it. A link that does
    not lead to a file is left as it is, and refused later on."""
    try:
        if "\0" in os.fspath(path):
            raise ValueError("it contains a NUL character")
        given = Path(os.path.abspath(path))
        return given.resolve(strict=True) if given.exists() else given.parent.resolve() / given.name
    except (OSError, ValueError, RuntimeError) as error:
        raise StoreError(
            f"not a usable path: {error}", remedy="check the path", place=Place(source=str(path))
        ) from None
