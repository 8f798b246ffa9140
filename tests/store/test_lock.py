"""One writer at a time; readers of a project that cannot be written to go on reading."""

import json
import os
import shutil
import tempfile
from pathlib import Path

import pytest
from store.crashes import committed, decided, make_old, snapshot

from workbench.errors import BusyError, StorageError, WorkbenchError
from workbench.store.hashes import check_all, check_file
from workbench.store.journal import read_journal
from workbench.store.lock import project_lock, read_holder, settle
from workbench.store.manifest import read_manifest
from workbench.store.paths import find_project
from workbench.store.tables import read_table

NOBODY = 65534


@pytest.fixture
def shut():
    """Return a project that the present user may read but not write."""
    folder = Path(tempfile.mkdtemp(prefix="readonly-"))
    folder.chmod(0o755)
    make_old(folder)
    (folder / "results/main/table.tsv").write_text("feature\tr\na\t0.5\n")
    folders = [folder, *(path for path in folder.rglob("*") if path.is_dir())]
    for path in folders:
        path.chmod(0o555)
    was = os.geteuid()
    if was == 0:
        os.seteuid(NOBODY)
    yield folder
    os.seteuid(was)
    for path in folders:
        path.chmod(0o755)
    shutil.rmtree(folder)


def test_the_lock_is_free_again_after_use_and_after_an_error(tmp_path):
    with project_lock(tmp_path, "one"):
        holder = read_holder(tmp_path)
        assert (holder.process, holder.command) == (os.getpid(), "one")
    with pytest.raises(KeyError, match="x"), project_lock(tmp_path, "two"):
        raise KeyError("x")
    with project_lock(tmp_path, "three"):
        assert read_holder(tmp_path).command == "three"
    assert read_holder(tmp_path) is None


def test_a_project_in_use_is_busy_for_the_same_process_too(tmp_path):
    with project_lock(tmp_path, "first"):
        with pytest.raises(BusyError, match=r"`first` \(process"), project_lock(tmp_path, "second"):
            pytest.fail("the lock was given twice")
        assert read_holder(tmp_path).command == "first"


@pytest.mark.parametrize("text", ["", "{", '{"process": 1}', "[]", '{"process": "x", "machine": "here"}'])
def test_a_torn_note_of_the_holder_does_not_matter(tmp_path, text):
    with project_lock(tmp_path, "first"):
        (tmp_path / ".workbench/holder.json").write_text(text)
        with pytest.raises(BusyError, match="another command is changing"), project_lock(tmp_path, "second"):
            pytest.fail("the lock was given twice")


def test_the_note_of_a_dead_process_does_not_matter_that_of_another_machine_may(tmp_path):
    (tmp_path / ".workbench").mkdir()
    note = {"process": 2**22 + 1, "machine": os.uname().nodename, "command": "x", "since": "2026"}
    (tmp_path / ".workbench/holder.json").write_text(json.dumps(note))
    assert read_holder(tmp_path) is None
    (tmp_path / ".workbench/holder.json").write_text(json.dumps(note | {"machine": "elsewhere"}))
    assert read_holder(tmp_path).machine == "elsewhere"
    with project_lock(tmp_path, "next"):
        assert read_holder(tmp_path).command == "next"


def unfinished(root, monkeypatch):
    """Leave a project with a change that is decided and not done."""
    decided(root, monkeypatch, lambda change: change.write_text("results/main/edges.tsv", "new edges"))


def test_taking_the_lock_finishes_what_was_begun(tmp_path, monkeypatch):
    make_old(tmp_path)
    unfinished(tmp_path, monkeypatch)
    assert (tmp_path / "results/main/edges.tsv").read_text() == "old edges"
    with project_lock(tmp_path, "next"):
        assert (tmp_path / "results/main/edges.tsv").read_text() == "new edges"
    assert not any(name.endswith((".part", "pending.json")) for name in snapshot(tmp_path))


def test_a_reader_finishes_it_too_unless_another_is_at_it(tmp_path, monkeypatch):
    make_old(tmp_path)
    before = snapshot(tmp_path)
    settle(tmp_path)
    assert snapshot(tmp_path) == before
    unfinished(tmp_path, monkeypatch)
    settle(tmp_path)
    assert (tmp_path / "results/main/edges.tsv").read_text() == "new edges"
    with project_lock(tmp_path, "writer"):
        (tmp_path / ".workbench/pending.json").write_text("{}")
        settle(tmp_path)
        assert (tmp_path / ".workbench/pending.json").exists()


def test_a_project_that_cannot_be_written_is_read_all_the_same(shut):
    paths = find_project(shut / "results/main")
    assert paths.root == shut.resolve()
    settle(shut)
    assert check_all(shut) == []
    assert check_file(shut, "blocks/a.h5ad").read_text() == "block a"
    assert [line["command"] for line in read_journal(shut)] == ["first"]
    assert set(read_manifest(shut).stages) == {"read:a", "look:a"}
    assert read_table(shut / "results/main/table.tsv")["r"].tolist() == [0.5]


def test_a_project_that_cannot_be_written_tells_a_writer_so(shut):
    told = r"no permission; .* any command whose stages are all up to date work"
    with pytest.raises(StorageError, match=told), project_lock(shut, "workbench run"):
        pytest.fail("the lock was given")
    with pytest.raises(WorkbenchError, match=r"results/main/edges.tsv: no permission; .*nothing was changed"):
        committed(shut, lambda change: change.write_text("results/main/edges.tsv", "x"))
