"""Files from strangers: damaged, foreign and malicious ones are one StoreError before they are used."""

from __future__ import annotations

import os
import random
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pytest

from frg.errors import StoreError
from frg.store import files, guard, vetting
from frg.store.checking import check_run
from frg.store.compare import differences
from frg.store.hdf5 import open_for_resume, read_run
from frg.store.naming import list_runs

Edit = Callable[[h5py.File], None]


def edit(path: Path, change: Edit, *, forge: bool = True) -> Path:
    """The run changed by another program, with a forged seal unless `forge` is off."""
    with h5py.File(path, "r+") as file:
        change(file)
    if forge:
        path.write_bytes(files.seal(path.read_bytes()))
    return path


def test_flipped_bytes_are_always_noticed(run_file: Path) -> None:
    data = run_file.read_bytes()
    choose = random.Random(1)
    for _ in range(400):
        damaged = bytearray(data)
        for position in choose.choices(
            range(8, len(data) - files._SEAL_LENGTH), k=choose.choice([1, 1, 3, 50])
        ):
            damaged[position] ^= choose.randrange(1, 256)
        run_file.write_bytes(damaged)
        with pytest.raises(StoreError, match="does not match its checksum"):
            read_run(run_file)
        assert [s.status for s in list_runs(run_file.parent)] == ["unreadable"]
    assert not check_run(run_file).ok


def test_a_damaged_seal_alone_is_noticed(run_file: Path) -> None:
    data = run_file.read_bytes()
    for position in range(len(data) - files._SEAL_LENGTH, len(data)):
        damaged = bytearray(data)
        damaged[position] ^= 0x20
        run_file.write_bytes(damaged)
        with pytest.raises(StoreError, match="damaged"):
            read_run(run_file)


def test_a_cut_file_is_never_read_as_something_else(run_file: Path) -> None:
    data = run_file.read_bytes()
    whole = read_run(run_file)
    choose = random.Random(2)
    end = len(data) - files._SEAL_LENGTH
    for length in [*range(40), *range(end - 5, len(data)), *choose.sample(range(len(data)), 300)]:
        run_file.write_bytes(data[:length])
        if length == end:  # only the seal is gone: as if another program had written the file
            assert differences(read_run(run_file), whole) == ()
            with pytest.raises(StoreError, match="checksum is gone"):
                open_for_resume(run_file)
        else:
            with pytest.raises(StoreError):
                read_run(run_file)


def test_damage_without_a_seal_reaches_only_the_child(
    run_file: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Bytes flipped in a file that never had a seal: an error or a run, never anything else."""
    monkeypatch.setattr(vetting, "TIME_LIMIT", 3)
    data, _ = files.unseal(run_file.read_bytes())
    positions = [i for i, byte in enumerate(data) if byte and i >= 8]
    choose = random.Random(3)
    refused = 0
    for _ in range(12):
        damaged = bytearray(data)
        for position in choose.sample(positions, 40):
            damaged[position] = choose.randrange(256)
        run_file.write_bytes(damaged)
        try:
            read_run(run_file)
        except StoreError:
            refused += 1
    assert refused > 0


@pytest.mark.parametrize("code", ["import os; os.abort()", "while True: pass", "import sys; sys.exit(3)"])
def test_a_child_that_dies_or_hangs_is_an_error(
    run_file: Path, monkeypatch: pytest.MonkeyPatch, code: str
) -> None:
    edit(run_file, lambda file: file.attrs.create("remark", "added"), forge=False)
    assert len(read_run(run_file).steps) == 3
    monkeypatch.setattr(vetting, "_CHILD", code)
    monkeypatch.setattr(vetting, "TIME_LIMIT", 0.5)
    with pytest.raises(StoreError, match="the HDF5 library fails on it"):
        read_run(run_file)


def external_dataset(file: h5py.File) -> None:
    group = file["steps/0000/fixed_points/0"]
    del group["couplings"]
    group.create_dataset("couplings", shape=(2,), dtype="f8", external=[("other.raw", 0, 16)])


def virtual_dataset(file: h5py.File) -> None:
    layout = h5py.VirtualLayout(shape=(2,), dtype="f8")
    layout[:] = h5py.VirtualSource("other.h5", "secret", shape=(2,))
    file.create_virtual_dataset("more", layout)


def hard_link_cycle(file: h5py.File) -> None:
    file["steps/back"] = file["/"]


def twice(file: h5py.File) -> None:
    file["steps/0000/fixed_points/0/again"] = file["steps/0000/fixed_points/0/theta"]


def deep(file: h5py.File) -> None:
    file.create_group("/".join("abcdefghijkl"))


def many_attributes(file: h5py.File) -> None:
    for number in range(100):
        file["steps"].attrs[f"a{number}"] = number


def large_attribute(file: h5py.File) -> None:
    large = h5py.File(file.filename + ".other", "w", libver="latest")
    large.attrs["a"] = np.zeros(2**18)
    large.copy(large["/"], file, "large")
    large.close()


def never_written_giant(file: h5py.File) -> None:
    file.create_dataset("giant", shape=(2**40,), chunks=(2**10,), dtype="f8")


def giant_chunk(file: h5py.File) -> None:
    file.create_dataset("chunk", shape=(2**22,), chunks=(2**22,), dtype="f8")


def many_large(file: h5py.File) -> None:
    for number in range(6):
        file.create_dataset(f"large{number}", shape=(2**23,), chunks=(2**10,), dtype="f8")


def foreign_filter(file: h5py.File) -> None:
    file.create_dataset("packed", data=np.zeros(64), chunks=(64,), compression="lzf")


def named_type(file: h5py.File) -> None:
    file["type"] = np.dtype("f8")


def references(file: h5py.File) -> None:
    file.create_dataset("references", data=np.array([file.ref], dtype=h5py.ref_dtype))


def ragged(file: h5py.File) -> None:
    file.create_dataset("ragged", shape=(2,), dtype=h5py.vlen_dtype(np.int32))


def opaque(file: h5py.File) -> None:
    file.create_dataset("opaque", data=np.array([1, 2], "datetime64[s]").astype(h5py.opaque_dtype("M8[s]")))


def records(file: h5py.File) -> None:
    file.create_dataset("records", data=np.zeros(2, dtype=[("a", "i4"), ("b", "f8")]))


FOREIGN: list[tuple[Edit, str]] = [
    (lambda f: f.__setitem__("out", h5py.ExternalLink("other.h5", "/secret")), "link to elsewhere"),
    (lambda f: f.__setitem__("soft", h5py.SoftLink("/steps")), "link to elsewhere"),
    (external_dataset, "keeps its data in another file"),
    (virtual_dataset, "virtual"),
    (hard_link_cycle, "linked twice"),
    (twice, "linked twice"),
    (deep, "nested deeper"),
    (many_attributes, "more than 64 attributes"),
    (large_attribute, "larger than"),
    (never_written_giant, "too large"),
    (many_large, "too large"),
    (giant_chunk, "chunks too large"),
    (foreign_filter, "filter"),
    (named_type, "neither group nor dataset"),
    (references, "kind that does not belong"),
    (ragged, "kind that does not belong"),
    (opaque, "kind that does not belong"),
    (records, "holds records"),
]


@pytest.mark.parametrize(("change", "words"), FOREIGN)
def test_foreign_content_is_refused(run_file: Path, change: Edit, words: str) -> None:
    with h5py.File(run_file.with_name("other.h5"), "w") as other:
        other["secret"] = np.ones(2)
    edit(run_file, change)
    with pytest.raises(StoreError, match=words):
        read_run(run_file)
    report = check_run(run_file)
    assert [check.name for check in report.failed] == ["readable"]


def set_attribute(where: str, name: str, value: object) -> Edit:
    return lambda file: file[where].attrs.__setitem__(name, value)


POINT = "steps/0000/fixed_points/1"
BROKEN: list[tuple[Edit, str]] = [
    (set_attribute("/", "format", "something"), "is no run file"),
    (lambda f: f.attrs.__delitem__("format"), "is no run file"),
    (set_attribute("/", "format", 3), "is no text"),
    (set_attribute("/", "format_version", 2), "(?s)format version 2, .* reads up to 1.*newer version"),
    (set_attribute("/", "format_version", 0), "format version 0"),
    (set_attribute("/", "format_version", "1"), "no integer"),
    (set_attribute("/", "status", "asleep"), "status is 'asleep'"),
    (set_attribute("/", "title", np.bytes_(b"\xff\xfe")), "surrogates|decode"),
    (set_attribute("/", "packages", "[1]"), "no JSON object"),
    (set_attribute("settings", "values", "{" * 100_000), "no JSON"),
    (set_attribute("settings", "values", "[" * 100_000), "no JSON"),
    (set_attribute("steps/0000", "order", '{"n": "x"}'), "cannot be read"),
    (set_attribute("steps/0000", "outcome", "splendid"), "outcome 'splendid' is unknown"),
    (set_attribute(POINT, "kind", "odd"), "kind 'odd'"),
    (set_attribute(POINT, "notes", '{"a": 1}'), "no list of texts"),
    (set_attribute(POINT, "residual", np.zeros(3)), "no number"),
    (set_attribute(POINT, "residual", h5py.Empty("f8")), "no number"),
    (lambda f: f[POINT].__delitem__("theta"), "dataset theta is missing"),
    (lambda f: f[POINT].attrs.__delitem__("relevant"), "attribute relevant"),
    (lambda f: f.__delitem__("regulator"), "group regulator is missing"),
    (lambda f: f[POINT].move("theta", "thetas"), "dataset theta is missing"),
    (lambda f: (f[POINT].__delitem__("theta"), f[POINT].create_group("theta")), "dataset theta is missing"),
    (lambda f: (f[POINT].__delitem__("right"), f[POINT].create_dataset("right", data=np.eye(3))), "shape"),
    (
        lambda f: (f[POINT].__delitem__("eta"), f[POINT].create_dataset("eta", data=np.ones(3))),
        "cannot be read",
    ),
    (
        lambda f: (
            f[POINT].__delitem__("couplings"),
            f[POINT].create_dataset("couplings", data=[b"a", b"b"]),
        ),
        "no numbers",
    ),
    (
        lambda f: (f[POINT].__delitem__("coupling"), f[POINT].create_dataset("coupling", data=[1.0, 2.0])),
        "no list of names",
    ),
]


@pytest.mark.parametrize(("change", "words"), BROKEN)
def test_broken_content_is_refused(run_file: Path, change: Edit, words: str) -> None:
    edit(run_file, change)
    with pytest.raises(StoreError, match=words) as caught:
        read_run(run_file)
    assert caught.value.place.source == str(run_file)
    assert caught.value.remedy


def test_a_newer_version_without_a_seal_gets_the_same_advice(run_file: Path) -> None:
    edit(run_file, set_attribute("/", "format_version", 2), forge=False)
    with pytest.raises(StoreError, match="(?s)format version 2.*read it with a newer version"):
        read_run(run_file)


def test_many_names_that_share_one_long_text_are_not_unfolded(run_file: Path) -> None:
    """Strings of variable length may point to one text; here each of many entries is a long one."""

    def change(file: h5py.File) -> None:
        del file[POINT]["coupling"]
        texts = np.array(["x" * 2**20] * 20, dtype=object)
        file[POINT].create_dataset("coupling", data=texts, dtype=h5py.string_dtype())

    edit(run_file, change)
    with pytest.raises(StoreError, match="too long"):
        read_run(run_file)


def test_what_is_no_hdf5_file_is_refused_at_once(tmp_path: Path) -> None:
    (tmp_path / "empty.h5").write_bytes(b"")
    (tmp_path / "text.h5").write_text("hello")
    (tmp_path / "magic.h5").write_bytes(files.HDF5_MAGIC)
    with (tmp_path / "sparse.h5").open("wb") as stream:
        stream.truncate(2**40)
    os.mkfifo(tmp_path / "pipe.h5")
    (tmp_path / "folder.h5").mkdir()
    for name, words in [
        ("empty", "file is empty"),
        ("text", "not an HDF5 file"),
        ("magic", "superblock"),
        ("sparse", "bytes"),
        ("pipe", "not a regular file"),
        ("folder", "a folder"),
        ("none", "No such file"),
    ]:
        with pytest.raises(StoreError, match=words):
            read_run(tmp_path / f"{name}.h5")


def test_random_bytes_after_the_magic_are_refused(tmp_path: Path) -> None:
    choose = random.Random(4)
    path = tmp_path / "noise.h5"
    for _ in range(100):
        path.write_bytes(files.HDF5_MAGIC + choose.randbytes(choose.randrange(300)))
        with pytest.raises(StoreError):
            read_run(path)


def test_additions_of_other_programs_do_not_disturb(run_file: Path) -> None:
    before = read_run(run_file)

    def annotate(file: h5py.File) -> None:
        file.attrs["remark"] = "looks fine"
        file["steps/0000"].create_dataset("extra", data=np.zeros(200), compression="gzip")

    edit(run_file, annotate, forge=False)
    assert differences(read_run(run_file), before) == ()
    assert [check.name for check in check_run(run_file).failed] == ["checksum"]


def test_the_guard_lets_nothing_escape(run_file: Path) -> None:
    with pytest.raises(StoreError, match="ZeroDivisionError"), guard.opened(run_file):
        _ = 1 / 0
    with pytest.raises(KeyboardInterrupt), guard.opened(run_file):
        raise KeyboardInterrupt
