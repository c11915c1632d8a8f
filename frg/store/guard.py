"""Opening run files from strangers: everything is checked before any value is read.

The HDF5 library follows external links, external raw storage and virtual datasets without asking, loads
filter plug-ins, and allocates whatever a file claims. Nothing of that kind belongs in a run file, so a file
with any of it is refused. The file is read into memory first and opened there: what was checked is what is
read.
"""

from __future__ import annotations

import contextlib
import math
import os
from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

from frg.errors import FrgError, Place, StoreError
from frg.store import files, vetting
from frg.store.layout import FORMAT, FORMAT_VERSION

if TYPE_CHECKING:
    import h5py

MAX_DEPTH = 8
MAX_OBJECTS = 200_000
MAX_ATTRIBUTES = 64
MAX_ATTRIBUTE_BYTES = 2**20
MAX_TEXT = 16 * 2**20
MAX_NAMES = 2**16
MAX_DATASET_BYTES = 2**26
MAX_TOTAL_BYTES = 2**28
MAX_CHUNK_BYTES = 2**24
# deflate, shuffle and fletcher32 come with every HDF5 library (a repacked run stays readable); all other
# filters would load code found in a plug-in folder.
_BUILT_IN_FILTERS = frozenset({1, 2, 3})


@contextlib.contextmanager
def opened(path: str | os.PathLike[str], *, sealed: bool = False, whole: bool = True) -> Iterator[h5py.File]:
    """The run file, opened for reading in memory after all checks; `whole=False` checks the root only.

    A file whose seal does not match is refused. One without a seal (written or changed by another program) is
    refused if `sealed` is set, and read by a child process first otherwise. Whatever goes wrong in the body
    while reading, too, raises StoreError."""
    data, state = files.unseal(files.read_bytes(path))
    place = Place(source=str(path))
    if state is False:
        raise StoreError(
            "the run file is damaged: its content does not match its checksum",
            remedy="restore it from a copy, or repeat the run",
            place=place,
        )
    if state is None:
        with translated(path):
            _check_end(data)
        if sealed:
            raise StoreError(
                "the run file was changed by another program: its checksum is gone",
                remedy="repeat the run, or look at the file with `frg show` and `frg check`",
                place=place,
            )
        vetting.vet(data, path)
    with open_checked(data, path, whole=whole) as file:
        yield file


@contextlib.contextmanager
def open_checked(data: bytes, path: str | os.PathLike[str], *, whole: bool) -> Iterator[h5py.File]:
    """The content of a run file, opened in memory after all checks but that of the seal."""
    with translated(path):
        import h5py

        with contextlib.closing(h5py.File(h5py.h5f.open_file_image(data))) as file:
            _check_attributes(file)
            _check_version(file)
            if whole:
                _Walk().group(file, 0)
            yield file


@contextlib.contextmanager
def translated(path: str | os.PathLike[str], done: str = "read") -> Iterator[None]:
    """Whatever the HDF5 library raises becomes a StoreError that names the file."""
    try:
        yield
    except FrgError as error:
        raise (error.at(Place(source=str(path))) if isinstance(error, StoreError) else error) from None
    except Exception as error:  # the errors of h5py have no common base
        detail = " ".join(str(error).split())[:200]
        raise StoreError(
            f"the run file cannot be {done}: {type(error).__name__}: {detail}",
            remedy="restore it from a copy, or repeat the run"
            if done == "read"
            else "see to free memory and resume the run; all committed steps are kept",
            place=Place(source=str(path)),
        ) from None


def text(holder: h5py.Group, name: str) -> str:
    """A text attribute, strictly decoded. Raises StoreError."""
    value = _attribute(holder, name)
    if isinstance(value, bytes):
        value = value.decode("utf-8", "strict")
    if not isinstance(value, str):
        raise _bad(f"attribute {name} of {holder.name} is no text")
    value.encode("utf-8", "strict")  # h5py hides undecodable bytes in surrogates
    if len(value) > MAX_TEXT:
        raise _bad(f"attribute {name} of {holder.name} is longer than {MAX_TEXT} characters")
    return value


def whole(holder: h5py.Group, name: str) -> int:
    """An integer attribute. Raises StoreError."""
    value = _attribute(holder, name)
    if not isinstance(value, np.generic) or value.dtype.kind not in "iub":
        raise _bad(f"attribute {name} of {holder.name} is no integer")
    return int(value.item())


def real(holder: h5py.Group, name: str) -> float:
    """A real attribute. Raises StoreError."""
    value = _attribute(holder, name)
    if not isinstance(value, np.generic) or value.dtype.kind not in "iuf":
        raise _bad(f"attribute {name} of {holder.name} is no number")
    return float(value.item())


def group(parent: h5py.Group, name: str) -> h5py.Group:
    """A subgroup. Raises StoreError."""
    import h5py

    child = parent.get(name)
    if not isinstance(child, h5py.Group):
        raise _bad(f"group {name} is missing in {parent.name}")
    return child


def dataset(parent: h5py.Group, name: str) -> h5py.Dataset:
    """A dataset. Raises StoreError."""
    import h5py

    child = parent.get(name)
    if not isinstance(child, h5py.Dataset):
        raise _bad(f"dataset {name} is missing in {parent.name}")
    return child


def names(parent: h5py.Group, name: str) -> tuple[str, ...]:
    """A list of texts, strictly decoded. Raises StoreError.

    Read one by one: many entries may point to one long text, so that their sum is not bounded by the file."""
    column = dataset(parent, name)
    if len(column.shape) != 1 or column.shape[0] > MAX_NAMES or column.dtype.kind not in "OS":
        raise _bad(f"dataset {name} of {parent.name} is no list of names")
    found: list[str] = []
    length = 0
    for index in range(column.shape[0]):
        value = column[index]
        length += len(value)
        if length > MAX_TEXT:
            raise _bad(f"dataset {name} of {parent.name} is too long")
        found.append(value.decode("utf-8", "strict") if isinstance(value, bytes) else str(value))
    return tuple(found)


def _attribute(holder: h5py.Group, name: str) -> object:
    if name not in holder.attrs:
        raise _bad(f"attribute {name} of {holder.name} is missing")
    return holder.attrs[name]


def _check_version(file: h5py.File) -> None:
    if "format" not in file.attrs or text(file, "format") != FORMAT:
        raise StoreError(
            f'this HDF5 file is no run file: its attribute format is not "{FORMAT}"', remedy="name a run file"
        )
    version = whole(file, "format_version")
    if version > FORMAT_VERSION:
        raise StoreError(
            f"the run file has format version {version}, this program reads up to {FORMAT_VERSION}",
            remedy="read it with a newer version of this program",
        )
    if version < 1:
        raise _bad(f"format version {version} does not exist")


def _check_end(data: bytes) -> None:
    """Refuse content that does not end where the superblock says (HDF5 file format specification, II.A): the
    file was cut, or what follows is the rest of a seal."""
    offset = {0: 40, 1: 44, 2: 28, 3: 28}.get(data[8] if len(data) > 8 else -1)
    if offset is None:
        raise _bad("its HDF5 superblock is unknown")
    if len(data) != int.from_bytes(data[offset : offset + 8], "little"):
        raise StoreError(
            "the run file is damaged: its end is missing", remedy="restore it from a copy, or repeat the run"
        )


class _Walk:
    """One pass over every object of a file, by hard links only."""

    def __init__(self) -> None:
        self._seen: set[int] = set()
        self._bytes = 0

    def group(self, group: h5py.Group, depth: int) -> None:
        import h5py

        self._once(group)
        if depth > MAX_DEPTH:
            raise _bad(f"groups are nested deeper than {MAX_DEPTH} levels")
        for name in group:
            if not isinstance(group.get(name, getlink=True), h5py.HardLink):
                raise _bad(f"{group.name} holds a link to elsewhere, {name!r}")
            child = group[name]
            if isinstance(child, h5py.Group):
                _check_attributes(child)
                self.group(child, depth + 1)
            elif isinstance(child, h5py.Dataset):
                self._once(child)
                _check_attributes(child)
                self._dataset(child)
            else:
                raise _bad(f"{group.name} holds an object that is neither group nor dataset, {name!r}")

    def _once(self, item: h5py.HLObject) -> None:
        import h5py

        address = h5py.h5o.get_info(item.id).addr
        if address in self._seen:
            raise _bad(f"{item.name} is linked twice")
        self._seen.add(address)
        if len(self._seen) > MAX_OBJECTS:
            raise _bad(f"the file holds more than {MAX_OBJECTS} objects")

    def _dataset(self, item: h5py.Dataset) -> None:
        import h5py

        creation = item.id.get_create_plist()
        layout = creation.get_layout()
        if layout not in (h5py.h5d.CONTIGUOUS, h5py.h5d.COMPACT, h5py.h5d.CHUNKED):
            raise _bad(f"{item.name} is a virtual dataset")
        if creation.get_external_count():
            raise _bad(f"{item.name} keeps its data in another file")
        if item.id.get_space().get_simple_extent_type() not in (h5py.h5s.SIMPLE, h5py.h5s.SCALAR):
            raise _bad(f"{item.name} has no shape")
        for index in range(creation.get_nfilters()):
            if creation.get_filter(index)[0] not in _BUILT_IN_FILTERS:
                raise _bad(f"{item.name} needs a filter that does not belong in a run file")
        size = _item_bytes(item.id.get_type(), item.name)
        length = math.prod(item.id.shape) * size
        self._bytes += length
        if length > MAX_DATASET_BYTES or self._bytes > MAX_TOTAL_BYTES:
            raise _bad(f"{item.name} is too large for a run file")
        if layout == h5py.h5d.CHUNKED and math.prod(creation.get_chunk()) * size > MAX_CHUNK_BYTES:
            raise _bad(f"{item.name} has chunks too large for a run file")


def _item_bytes(kind: h5py.h5t.TypeID, name: str) -> int:
    """Size of one item of a type that may occur in datasets: integers, floats, complex numbers, text."""
    import h5py

    number = (h5py.h5t.INTEGER, h5py.h5t.FLOAT)
    what = kind.get_class()
    if what == h5py.h5t.COMPOUND:
        members = [kind.get_member_class(i) for i in range(kind.get_nmembers())]
        if members != [h5py.h5t.FLOAT, h5py.h5t.FLOAT]:
            raise _bad(f"{name} holds records")
    elif what not in (*number, h5py.h5t.STRING):
        raise _bad(f"{name} holds values of a kind that does not belong in a run file")
    return int(kind.get_size())


def _check_attributes(item: h5py.Group | h5py.Dataset) -> None:
    import h5py

    count = h5py.h5a.get_num_attrs(item.id)
    if count > MAX_ATTRIBUTES:
        raise _bad(f"{item.name} has more than {MAX_ATTRIBUTES} attributes")
    for index in range(count):
        attribute = h5py.h5a.open(item.id, index=index)
        size = math.prod(attribute.shape or (1,)) * attribute.get_type().get_size()
        if size > MAX_ATTRIBUTE_BYTES:
            raise _bad(f"an attribute of {item.name} is larger than {MAX_ATTRIBUTE_BYTES} bytes")


def _bad(message: str) -> StoreError:
    return StoreError(f"not a sound run file: {message}", remedy="restore it from a copy, or repeat the run")
