"""Bytes on disk: whole-file replacement that survives a kill, one writer a run, and a checksum at the end.

HDF5 appends are not crash-safe, so a run file is never appended to: its new content is written beside it,
synced, and renamed over it. The last bytes of a run file are a seal, a line with the sha256 of all bytes
before it. HDF5 readers ignore what follows the end they have recorded, and any HDF5 program that changes the
file cuts it off.
"""

from __future__ import annotations

import contextlib
import errno
import fcntl
import hashlib
import os
import stat
import time
from collections.abc import Iterator
from pathlib import Path

from frg.errors import Place, StoreError

MAX_FILE_BYTES = 256 * 2**20
HDF5_MAGIC = b"\x89HDF\r\n\x1a\n"
_SEAL_HEAD = b"\nfrg run sha256 "
_SEAL_LENGTH = len(_SEAL_HEAD) + 64 + 1
# Listing a folder probes locks for some microseconds; a writer that meets such a probe waits this long in
# all.
_LOCK_PATIENCE = 0.25

_REMEDIES = {
    errno.ENOSPC: "free some space on this disk, then resume the run; all committed steps are kept",
    errno.EDQUOT: "free some space within your quota, then resume the run; all committed steps are kept",
    errno.EACCES: "choose a folder you may write to with --save",
    errno.EPERM: "choose a folder you may write to with --save",
    errno.EROFS: "this file system is read-only: choose another folder with --save",
    errno.ENOTDIR: "a part of the path is a file, not a folder: choose another path with --save",
    errno.EISDIR: "the path is a folder: name a file in it",
    errno.ENOENT: "check the path",
    errno.ENAMETOOLONG: "choose a shorter file name",
}


def os_error(path: str | os.PathLike[str], doing: str, error: OSError) -> StoreError:
    """A StoreError that says what failed on which file, and what helps."""
    reason = error.strerror or str(error)
    remedy = _REMEDIES.get(error.errno or 0, "check the disk and the permissions of the folder")
    return StoreError(f"{doing} failed: {reason}", remedy=remedy, place=Place(source=str(path)))


def seal(content: bytes) -> bytes:
    """`content` with its checksum line at the end."""
    return content + _SEAL_HEAD + hashlib.sha256(content).hexdigest().encode("ascii") + b"\n"


def unseal(data: bytes) -> tuple[bytes, bool | None]:
    """The content, and whether its seal holds: True, False (it does not match), None (there is no seal)."""
    content, tail = data[:-_SEAL_LENGTH], data[-_SEAL_LENGTH:]
    if not tail.startswith(_SEAL_HEAD):
        return data, None
    return content, seal(content)[-_SEAL_LENGTH:] == tail


def read_bytes(path: str | os.PathLike[str]) -> bytes:
    """All bytes of a regular file that begins like HDF5. Raises StoreError for anything else."""
    place = Place(source=str(path))
    try:
        # O_NONBLOCK: opening a named pipe must not hang.
        descriptor = os.open(path, os.O_RDONLY | os.O_NONBLOCK)
    except OSError as error:
        raise os_error(path, "opening the run file", error) from None
    except ValueError as error:
        raise StoreError(f"not a file name: {error}", remedy="check the path", place=place) from None
    try:
        info = os.fstat(descriptor)
        if not stat.S_ISREG(info.st_mode):
            what = "a folder" if stat.S_ISDIR(info.st_mode) else "not a regular file"
            raise StoreError(f"the path is {what}", remedy="name a run file", place=place)
        if info.st_size > MAX_FILE_BYTES:
            raise StoreError(
                f"the file holds {info.st_size} bytes, run files hold less than {MAX_FILE_BYTES}",
                remedy="this is no run file of this program",
                place=place,
            )
        with os.fdopen(descriptor, "rb", closefd=False) as stream:
            data = stream.read(MAX_FILE_BYTES + 1)
    except OSError as error:
        raise os_error(path, "reading the run file", error) from None
    finally:
        os.close(descriptor)
    if not data.startswith(HDF5_MAGIC):
        raise StoreError(
            "this is not an HDF5 file" if data else "the file is empty", remedy="name a run file", place=place
        )
    return data


def replace_file(path: Path, data: bytes) -> None:
    """Put `data` in place of the file, durably: after a kill at any moment the old or the new content is
    there.

    The caller holds the run's lock, so the fixed name of the temporary file meets no other writer, and one
    left behind by a kill is overwritten by the next commit. Raises StoreError, with the old content in
    place."""
    temporary = path.with_name(f".{path.name}.tmp")
    try:
        descriptor = os.open(temporary, os.O_WRONLY | os.O_CREAT | os.O_TRUNC | os.O_NOFOLLOW, 0o666)
        try:
            _write_all(descriptor, data)
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
        os.replace(temporary, path)
    except OSError as error:
        _remove(temporary)
        raise os_error(path, "writing the run file", error) from None
    except BaseException:
        _remove(temporary)
        raise
    sync_folder(path.parent)


def sync_folder(folder: Path) -> None:
    """Make a rename in the folder durable, where the file system can. Raises StoreError."""
    try:
        descriptor = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
    except OSError as error:
        raise os_error(folder, "opening the folder", error) from None
    try:
        os.fsync(descriptor)
    except OSError as error:
        # Some network file systems offer no fsync on folders; the rename itself stays atomic there.
        if error.errno not in (errno.EINVAL, errno.ENOTSUP, errno.EBADF):
            raise os_error(folder, "syncing the folder", error) from None
    finally:
        os.close(descriptor)


def _write_all(descriptor: int, data: bytes) -> None:
    view = memoryview(data)
    while view:
        written = os.write(descriptor, view)
        if written <= 0:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        view = view[written:]


def _remove(path: Path) -> None:
    with contextlib.suppress(OSError):
        os.unlink(path)


class WriterLock:
    """The right to write one run, held until `release()` or the death of the process.

    The lock sits on `<name>.lock` beside the run file, because the run file itself is replaced at every
    commit and a lock on it would go with the old content. A lock file left by a killed process locks
    nothing."""

    def __init__(self, path: Path):
        """Take the lock of the run file `path`. Raises StoreError if another writer holds it."""
        self._path = lock_path(path)
        deadline = time.monotonic() + _LOCK_PATIENCE
        while True:
            descriptor = self._open(path)
            try:
                fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
                if self._current(descriptor):
                    self._descriptor: int | None = descriptor
                    return
                os.close(descriptor)  # its owner removed it between our open and our lock: take the new one
            except BlockingIOError:
                os.close(descriptor)
                if time.monotonic() > deadline:
                    raise StoreError(
                        "another writer has this run open",
                        remedy="wait until it has finished or stop it; a run has one writer at a time",
                        place=Place(source=str(path)),
                    ) from None
                time.sleep(0.01)
            except OSError as error:
                os.close(descriptor)
                raise os_error(path, "locking the run", error) from None

    def _open(self, path: Path) -> int:
        try:
            return os.open(self._path, os.O_RDWR | os.O_CREAT | os.O_NOFOLLOW, 0o666)
        except OSError as error:
            raise os_error(path, "locking the run", error) from None

    def _current(self, descriptor: int) -> bool:
        try:
            named = os.stat(self._path, follow_symlinks=False)
        except FileNotFoundError:
            return False
        return os.path.samestat(named, os.fstat(descriptor))

    def release(self) -> None:
        """Remove the lock file and let go; may be called again."""
        if self._descriptor is None:
            return
        _remove(self._path)  # while still locked, so that whoever opened it sees that it is no longer current
        os.close(self._descriptor)
        self._descriptor = None


def lock_path(path: Path) -> Path:
    """Where the lock of a run file lives."""
    return path.with_name(f"{path.name}.lock")


def has_writer(path: Path) -> bool:
    """Whether a live process holds the run's lock. Changes nothing on disk."""
    with _shared(lock_path(path)) as descriptor:
        if descriptor is None:
            return False
        try:
            fcntl.flock(descriptor, fcntl.LOCK_SH | fcntl.LOCK_NB)
        except BlockingIOError:
            return True
        except OSError:
            return False
        return False


@contextlib.contextmanager
def _shared(path: Path) -> Iterator[int | None]:
    try:
        descriptor = os.open(path, os.O_RDONLY | os.O_NONBLOCK | os.O_NOFOLLOW)
    except OSError:
        yield None
        return
    try:
        yield descriptor
    finally:
        os.close(descriptor)
