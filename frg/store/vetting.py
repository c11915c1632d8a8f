"""A trial read in another process, for files that carry no seal.

The HDF5 library itself hangs or aborts on some damaged files (version 2.0: within two thousand files with
random bytes changed). The seal keeps accidental damage away from it. A file without a seal, which another
program wrote or changed, is read completely in a child process under limits first; only what survives that is
opened here. Whoever forges a file *and* its seal on purpose gets past this, to the checks of the guard.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys

from frg.errors import Place, StoreError

TIME_LIMIT = 10  # seconds; the largest run file allowed reads in a fraction of it
MEMORY_LIMIT = 8 * 2**30
_CHILD = "import sys; sys.path[:] = sys.argv[1:]; from frg.store.vetting import main; main()"


def vet(data: bytes, path: str | os.PathLike[str]) -> None:
    """Read an unsealed run file in a child process. Raises StoreError where that fails or ends badly."""
    place = Place(source=str(path))
    try:
        child = subprocess.run(
            [sys.executable, "-c", _CHILD, *sys.path],
            input=data,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            timeout=TIME_LIMIT,
            check=False,
        )
    except subprocess.TimeoutExpired:
        child = None
    except OSError as error:
        raise StoreError(
            f"the run file carries no checksum, and no process could be started to try it: {error}",
            remedy="restore it from a copy, or repeat the run",
            place=place,
        ) from None
    if child is None or child.returncode != 0:
        raise StoreError(
            "the run file is damaged: the HDF5 library fails on it",
            remedy="restore it from a copy, or repeat the run",
            place=place,
        )
    answer = json.loads(child.stdout)
    if answer is not None:
        raise StoreError(answer["message"], remedy=answer["remedy"], place=place)


def main() -> None:
    """The child: reads a run file from standard input and answers with null or an error, as JSON."""
    import resource

    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    resource.setrlimit(resource.RLIMIT_CPU, (TIME_LIMIT, TIME_LIMIT))
    resource.setrlimit(resource.RLIMIT_AS, (MEMORY_LIMIT, MEMORY_LIMIT))
    from frg.store import guard, reading

    answer = None
    try:
        with guard.open_checked(sys.stdin.buffer.read(), "", whole=True) as file:
            reading.read_run(file)
            reading.uncommitted(file)
    except StoreError as error:
        answer = {"message": error.message, "remedy": error.remedy}
    sys.stdout.write(json.dumps(answer))
    sys.stdout.flush()
    os._exit(0)  # without the clean-up of the HDF5 library, which may stumble over what the file did to it
