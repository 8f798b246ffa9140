"""What a change may do, and what it refuses."""

import json
import os
import stat

import pytest
from store.crashes import TIME, committed, decided, make_old, snapshot

from workbench.errors import DamageError, InputError, StorageError, WorkbenchError
from workbench.store.files import sha256_of
from workbench.store.journal import read_journal
from workbench.store.manifest import StageRecord, read_manifest
from workbench.store.paths import check_relative
from workbench.store.pending import read_steps, take_steps
from workbench.store.recovery import recover
from workbench.store.transaction import Change


@pytest.fixture
def root(tmp_path):
    make_old(tmp_path)
    return tmp_path


def test_a_commit_records_the_hash_of_every_file_and_the_stages(root):
    manifest = read_manifest(root)
    assert set(manifest.files) == {name for name in snapshot(root) if (root / name).is_file()} - {
        "journal.jsonl",
        ".workbench/manifest.json",
    }
    assert all(sha256_of(root / name) == digest for name, digest in manifest.files.items())
    assert manifest.stages["read:a"] == StageRecord({"table": "1"}, ("blocks/a.h5ad",))


def test_leaving_without_commit_changes_nothing(root):
    before = snapshot(root)
    with Change(root) as change:
        change.write_text("results/other/new/edges.tsv", "x")
        change.remove("blocks/a.h5ad")
    assert snapshot(root) == before


def test_an_error_inside_changes_nothing_and_passes_through(root):
    before = snapshot(root)
    with pytest.raises(ZeroDivisionError, match="division"), Change(root) as change:
        change.write_text("results/main/edges.tsv", str(1 / 0))
    assert snapshot(root) == before


def test_a_failing_writer_of_the_caller_is_told_as_a_full_disk(root):
    def write(change):
        path = change.new_file("results/main/edges.tsv")
        path.write_text("half")
        raise OSError(28, "No space left on device", str(path))

    before = snapshot(root)
    with pytest.raises(
        StorageError, match=r"/results/main/edges.tsv: the disk .* is full; .*nothing was changed"
    ):
        committed(root, write)
    assert snapshot(root) == before


def test_a_commit_of_nothing_writes_nothing(root):
    before = snapshot(root)
    with Change(root) as change:
        change.commit()
    assert snapshot(root) == before


def test_the_same_change_twice_gives_the_same_bytes(root):
    before = snapshot(root)
    with Change(root) as change:
        change.write_text("results/main/edges.tsv", "old edges")
        change.commit()
    assert snapshot(root) == before


def test_a_committed_change_takes_nothing_more(root):
    with Change(root) as change:
        change.write_text("results/main/a.txt", "a")
        change.commit()
        with pytest.raises(ValueError, match="committed already"):
            change.write_text("results/main/b.txt", "b")
        with pytest.raises(ValueError, match="committed already"):
            change.commit()


def test_a_file_that_was_asked_for_and_not_written_is_a_mistake_of_the_caller(root):
    with pytest.raises(ValueError, match=r"results/main/x.tsv: .* nothing was written"):
        committed(root, lambda change: change.new_file("results/main/x.tsv"))


PLACES = ["/etc/passwd", "../x", "results/../../x", "results/.hidden", ".workbench/manifest.json", "a\\b"]
PLACES += ["results//x", "", "elsewhere/x", "./x", "results/x/", "x\0y"]


@pytest.mark.parametrize("place", PLACES)
def test_places_outside_the_projects_folders_are_refused(root, place):
    with pytest.raises(InputError, match="is no place in a project"), Change(root) as change:
        change.write_text(place, "x")
    with pytest.raises(InputError, match="is no place in a project"):
        check_relative(place)


def test_a_folder_in_the_place_of_a_file_is_told(root):
    with pytest.raises(InputError, match="a folder stands where a file should"), Change(root) as change:
        change.write_text("results/main", "x")
    with pytest.raises(WorkbenchError, match="or a file where a folder should"), Change(root) as change:
        change.write_text("results/main/edges.tsv/x", "x")


def test_the_rights_of_a_replaced_file_stay(root):
    (root / "project.toml").chmod(0o640)
    with Change(root) as change:
        change.write_text("project.toml", "format = 1\n")
        change.commit()
    assert stat.S_IMODE((root / "project.toml").stat().st_mode) == 0o640


def test_a_copy_is_byte_for_byte_and_its_hash_goes_to_the_journal(root, tmp_path_factory):
    delivered = tmp_path_factory.mktemp("delivered") / "Table S1 (final).csv"
    delivered.write_bytes(bytes(range(256)) * 10)
    with Change(root) as change:
        digest = change.copy_in(delivered, "source/table.csv")
        change.commit({"command": "add-block", "time": TIME})
    assert (root / "source/table.csv").read_bytes() == delivered.read_bytes()
    assert digest == sha256_of(delivered)
    assert read_journal(root)[-1]["sources"] == [{"file": "source/table.csv", "sha256": digest}]


def test_sources_that_the_command_names_itself_are_not_named_twice(root, tmp_path):
    delivered = tmp_path / "x.tsv"
    delivered.write_text("x")
    with Change(root) as change:
        digest = change.copy_in(delivered, "source/x.tsv")
        named = [{"file": "source/x.tsv", "sha256": digest, "delivered_as": "x.tsv"}]
        change.commit({"command": "add-block", "sources": named})
    assert read_journal(root)[-1]["sources"] == named


def test_a_source_may_be_taken_in_from_its_own_place(root):
    with Change(root) as change:
        change.copy_in(root / "source/a.tsv", "source/a.tsv")
        change.commit()
    assert (root / "source/a.tsv").read_text() == "delivered a"


def test_what_is_no_plain_file_is_not_taken_in(root, tmp_path):
    os.mkfifo(tmp_path / "pipe")
    for path in (tmp_path, tmp_path / "pipe", tmp_path / "/dev/zero"):
        with pytest.raises(InputError, match="is not a plain file"), Change(root) as change:
            change.copy_in(path, "source/x.tsv")
    with pytest.raises(InputError, match="there is no such file"), Change(root) as change:
        change.copy_in(tmp_path / "none.tsv", "source/x.tsv")


def test_removing_a_folder_spares_what_a_person_laid_there(root):
    (root / "results/main/notes.txt").write_text("mine")
    with Change(root) as change:
        change.remove("results/main")
        change.commit()
    assert [path.name for path in (root / "results/main").iterdir()] == ["notes.txt"]
    assert not any(name.startswith("results/main") for name in read_manifest(root).files)


def test_the_last_word_on_a_file_counts(root):
    with Change(root) as change:
        change.remove("results/main/edges.tsv")
        change.write_text("results/main/edges.tsv", "kept")
        change.write_text("results/main/gone.tsv", "x")
        change.remove("results/main/gone.tsv")
        change.remove("results/main/never.tsv")
        change.commit()
    assert (root / "results/main/edges.tsv").read_text() == "kept"
    assert not (root / "results/main/gone.tsv").exists()
    assert "results/main/gone.tsv" not in read_manifest(root).files


def test_without_links_on_the_file_system_copies_are_made(root, monkeypatch):
    def refused(*_):
        raise OSError(95, "Operation not supported")

    monkeypatch.setattr(os, "link", refused)
    with Change(root) as change:
        change.write_text("results/main/edges.tsv", "new")
        change.commit()
    assert (root / "results/main/edges.tsv").read_text() == "new"
    assert not any(name.endswith(".part") for name in snapshot(root))


def test_long_and_foreign_names_have_neighbours(root):
    name = "results/main/" + "ä" * 120 + ".txt"
    with Change(root) as change:
        change.write_text(name, "x")
        change.commit()
    assert (root / name).read_text() == "x"


@pytest.mark.parametrize("anew", [False, True], ids=["in place", "as a new file"])
@pytest.mark.parametrize("name", ["project.toml", "samples.tsv"])
def test_an_edit_made_between_kill_and_recovery_is_not_lost(root, monkeypatch, name, anew):
    def write(change):
        change.write_text("project.toml", "the program's\n")
        change.write_text("samples.tsv", "the program's\n")
        change.write_text("blocks/b.h5ad", "block b")

    decided(root, monkeypatch, write)
    if anew:
        (root / name).unlink(missing_ok=True)
    (root / name).write_text("a person's\n")
    recover(root)
    assert (root / name).read_text() == "a person's\n"
    assert not (root / "blocks/b.h5ad").exists()
    assert "blocks/b.h5ad" not in read_manifest(root).files


def test_an_edit_made_after_all_was_done_but_the_last_step_does_not_undo_it(root, monkeypatch):
    def write(change):
        change.write_text("project.toml", "the program's\n")
        change.write_text("blocks/b.h5ad", "block b")

    decided(root, monkeypatch, write)
    steps = read_steps(root / ".workbench/pending.json")
    take_steps(root, steps)
    (root / "project.toml").write_text("a person's\n")
    recover(root)
    assert (root / "project.toml").read_text() == "a person's\n"
    assert (root / "blocks/b.h5ad").read_text() == "block b"
    assert not (root / ".workbench/pending.json").exists()


def test_a_new_version_that_was_damaged_meanwhile_takes_the_change_back(root, monkeypatch):
    before = snapshot(root)
    decided(root, monkeypatch, lambda change: change.write_text("results/main/edges.tsv", "new edges"))
    [part] = [
        path
        for path in (root / "results/main").iterdir()
        if path.name.startswith(".edges.tsv") and ".old" not in path.name
    ]
    part.write_text("torn")
    recover(root)
    assert snapshot(root) == before


def test_a_list_of_steps_that_leads_elsewhere_or_is_torn_is_dropped(root, tmp_path_factory):
    outside = tmp_path_factory.mktemp("outside") / "file"
    outside.write_text("safe")
    before = snapshot(root)
    step = {"file": "../" + outside.name, "part": None, "old": None, "sha256": None, "before": None}
    inside = {"file": "blocks/a.h5ad", "part": "../../x", "old": None, "sha256": "0", "before": None}
    for text in (
        json.dumps({"format": 1, "steps": [step]}),
        json.dumps({"format": 1, "steps": [inside]}),
        '{"form',
        "[]",
    ):
        (root / ".workbench/pending.json").write_text(text)
        recover(root)
        assert snapshot(root) == before
    assert outside.read_text() == "safe"


def test_a_change_begun_by_a_newer_version_is_left_to_that_one(root):
    (root / ".workbench/pending.json").write_text('{"format": 9, "steps": []}')
    with pytest.raises(DamageError, match="newer version of this program began a change"):
        recover(root)
    assert (root / ".workbench/pending.json").exists()


def test_recovery_spares_files_that_only_look_like_neighbours(root):
    for name in ("film.part", ".film.part", ".a.0123.part", "results/.edges.tsv.0123456789abcdeF.part"):
        (root / name).write_text("mine")
    stray = root / "results/.edges.tsv.0123456789abcdef.part"
    stray.write_text("stray")
    recover(root)
    assert not stray.exists()
    assert (root / "film.part").exists()
    assert (root / ".film.part").exists()
    assert (root / ".a.0123.part").exists()
    assert (root / "results/.edges.tsv.0123456789abcdeF.part").exists()
