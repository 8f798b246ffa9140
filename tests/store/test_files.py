"""Single steps on the disk, and what its failures are told as."""

import errno
import os
from pathlib import Path

import pytest

from workbench.errors import DamageError, StorageError
from workbench.store import files
from workbench.store.files import (
    explained,
    file_of,
    is_part,
    new_token,
    part_of,
    sync_folder,
    write_new,
    write_whole,
)


@pytest.mark.parametrize("name", ["edges.tsv", "a", ".hidden", "ä" * 127, "x" * 255, "two words.part"])
@pytest.mark.parametrize("suffix", ["", ".old"])
def test_a_neighbour_is_known_by_its_name_and_fits_into_a_folder(tmp_path, name, suffix):
    part = part_of(tmp_path / name, new_token(), suffix)
    assert part.parent == tmp_path
    assert is_part(part.name)
    assert not is_part(name)
    assert len(part.name.encode()) <= 255
    assert (tmp_path / name).name.startswith(file_of(part).name)
    part.touch()


@pytest.mark.parametrize(
    ("number", "kind", "told"),
    [
        (errno.ENOSPC, StorageError, "the disk (or your share of it) is full"),
        (errno.EDQUOT, StorageError, "the disk (or your share of it) is full"),
        (errno.EFBIG, StorageError, "the disk (or your share of it) is full"),
        (errno.EACCES, StorageError, "no permission"),
        (errno.EPERM, StorageError, "no permission"),
        (errno.EROFS, StorageError, "the file system is read-only; copy the project"),
        (errno.EIO, DamageError, "the disk reports a failure"),
        (errno.ENOTDIR, StorageError, "a folder stands where a file should, or a file where a folder should"),
        (errno.EMFILE, StorageError, "Too many open files; mend this and run the command again"),
    ],
)
def test_a_failure_of_the_disk_is_told_with_file_and_way_out(number, kind, told):
    error = explained(OSError(number, os.strerror(number), "results/.edges.tsv.0123456789abcdef.part"))
    assert type(error) is kind
    assert str(error).startswith(f"results/edges.tsv: {told}")
    assert str(explained(OSError(number, os.strerror(number)), Path("root"))).startswith(f"root: {told}")
    assert str(explained(OSError(number, os.strerror(number)))).startswith(told)


def test_a_file_is_written_whole_or_not_at_all(tmp_path, monkeypatch):
    path = tmp_path / "a.txt"
    write_whole(path, b"first")
    write_whole(path, memoryview(b"second"))
    assert path.read_bytes() == b"second"
    monkeypatch.setattr(os, "fsync", lambda _: (_ for _ in ()).throw(OSError(errno.EIO, "failed")))
    with pytest.raises(OSError, match="failed"):
        write_whole(path, b"third")
    assert path.read_bytes() == b"second"
    assert [file.name for file in tmp_path.iterdir()] == ["a.txt"]


def test_a_write_that_takes_several_turns_is_whole(tmp_path, monkeypatch):
    real = os.write
    monkeypatch.setattr(os, "write", lambda handle, data: real(handle, bytes(data)[:3]))
    write_new(tmp_path / "a.txt", b"0123456789")
    assert (tmp_path / "a.txt").read_bytes() == b"0123456789"


def test_a_new_file_never_replaces_another(tmp_path):
    (tmp_path / "a.txt").write_text("mine")
    with pytest.raises(FileExistsError, match=r"a.txt"):
        write_new(tmp_path / "a.txt", b"x")
    assert (tmp_path / "a.txt").read_text() == "mine"


def test_file_systems_that_cannot_sync_a_folder_are_borne_others_not(tmp_path, monkeypatch):
    def failing(number):
        def fsync(_):
            raise OSError(number, "told")

        return fsync

    monkeypatch.setattr(files.os, "fsync", failing(errno.EINVAL))
    sync_folder(tmp_path)
    monkeypatch.setattr(files.os, "fsync", failing(errno.EIO))
    with pytest.raises(OSError, match="told"):
        sync_folder(tmp_path)
