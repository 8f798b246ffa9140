"""Every stored file is checked against what the program wrote; a person's files and stale ones are no damage."""

import json

import pytest
from store.crashes import TIME, committed, make_old

from workbench.errors import BusyError, DamageError, InputError
from workbench.store.hashes import check_all, check_file, sha256_of, sha256_of_bytes
from workbench.store.manifest import Manifest, StageRecord, manifest_bytes, manifest_path, read_manifest
from workbench.store.transaction import Change


@pytest.fixture
def root(tmp_path):
    make_old(tmp_path)
    return tmp_path


def flip(path):
    """Change one bit of a file."""
    data = bytearray(path.read_bytes())
    data[len(data) // 2] ^= 1
    path.write_bytes(bytes(data))


def test_sha256_is_that_of_the_standard(tmp_path):
    (tmp_path / "abc").write_bytes(b"abc")
    # NIST, FIPS 180-2, appendix B.1: the digest of "abc".
    expected = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert sha256_of(tmp_path / "abc") == expected
    assert sha256_of_bytes(b"abc") == expected


def test_whole_files_pass_and_their_path_comes_back(root):
    for name in read_manifest(root).files:
        assert check_file(root, name) == root / name
    assert check_all(root) == []


@pytest.mark.parametrize(
    ("name", "way_out"),
    [("blocks/a.h5ad", "delete it and run `workbench run`"), ("source/a.tsv", "restore the delivered file")],
)
def test_one_flipped_bit_is_damage_with_a_way_out(root, name, way_out):
    flip(root / name)
    with pytest.raises(DamageError, match=rf"{name}: is not what the program wrote .*; {way_out}"):
        check_file(root, name)
    [fault] = check_all(root)
    assert (fault.file, fault.fault) == (name, "changed")
    assert way_out in fault.way_out


def test_a_missing_source_is_damage_a_missing_derived_file_is_stale(root):
    (root / "source/a.tsv").unlink()
    (root / "blocks/a.h5ad").unlink()
    with pytest.raises(DamageError, match=r"source/a.tsv: is missing; restore the delivered file"):
        check_file(root, "source/a.tsv")
    with pytest.raises(InputError, match=r"blocks/a.h5ad: is missing; run `workbench run`"):
        check_file(root, "blocks/a.h5ad")
    assert [(fault.file, fault.fault) for fault in check_all(root)] == [("source/a.tsv", "missing")]


def test_a_persons_files_are_never_damaged(root):
    (root / "project.toml").write_text("edited")
    assert check_file(root, "project.toml") == root / "project.toml"
    assert check_file(root, "samples.tsv") == root / "samples.tsv"
    (root / "project.toml").unlink()
    assert check_all(root) == []


def test_a_source_that_a_person_laid_there_passes_an_unknown_derived_file_does_not(root):
    (root / "source/genes.tsv").write_text("mine")
    (root / "blocks/planted.h5ad").write_text("planted")
    assert check_file(root, "source/genes.tsv") == root / "source/genes.tsv"
    with pytest.raises(
        InputError, match=r"planted.h5ad: is not in the list of stored files; run `workbench run`"
    ):
        check_file(root, "blocks/planted.h5ad")
    with pytest.raises(DamageError, match=r"source/none.tsv: is missing"):
        check_file(root, "source/none.tsv")


def test_without_its_manifest_a_project_still_knows_its_sources_by_the_journal(root, tmp_path_factory):
    delivered = tmp_path_factory.mktemp("delivered") / "b.tsv"
    delivered.write_text("b")
    with Change(root) as change:
        change.copy_in(delivered, "source/b.tsv")
        change.commit({"command": "add-block", "time": TIME})
    manifest_path(root).unlink()
    assert read_manifest(root) == Manifest()
    assert check_file(root, "source/b.tsv") == root / "source/b.tsv"
    flip(root / "source/b.tsv")
    with pytest.raises(DamageError, match=r"source/b.tsv: is not what the program wrote"):
        check_file(root, "source/b.tsv")
    assert [fault.file for fault in check_all(root)] == ["source/b.tsv"]


def test_a_file_that_is_just_being_replaced_is_busy_not_damaged(root):
    flip(root / "blocks/a.h5ad")
    (root / ".workbench/pending.json").write_text("{}")
    with pytest.raises(BusyError, match="another command is just replacing it"):
        check_file(root, "blocks/a.h5ad")


def test_a_file_that_cannot_be_read_is_told(root, monkeypatch):
    def denied(_):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("workbench.store.hashes.sha256_of", denied)
    with pytest.raises(DamageError, match=r"blocks/a.h5ad: cannot be read; Permission denied; give yourself"):
        check_file(root, "blocks/a.h5ad")
    assert {fault.fault for fault in check_all(root)} == {"unreadable"}


def test_a_manifest_is_sorted_holds_no_date_and_comes_back(root):
    manifest = read_manifest(root)
    data = manifest_path(root).read_bytes()
    assert manifest_bytes(manifest) == data
    turned = Manifest(dict(reversed(manifest.files.items())), dict(reversed(manifest.stages.items())))
    assert manifest_bytes(turned) == data
    assert set(json.loads(data)) == {"format", "files", "stages"}
    assert TIME not in data.decode()


DAMAGED = ["", "{", "[]", "null", '{"format": 1}', "[" * 100_000, '{"format": 0, "files": {}, "stages": {}}']
DAMAGED += ['{"format": 1, "files": {"a": 1}, "stages": {}}']
DAMAGED += ['{"format": 1, "files": {}, "stages": {"a": {"inputs": {}}}}']


@pytest.mark.parametrize("text", DAMAGED, ids=range(len(DAMAGED)))
def test_a_damaged_manifest_is_told_with_the_way_out(root, text):
    manifest_path(root).write_text(text)
    with pytest.raises(
        DamageError, match=r"manifest.json: the list of stored files is damaged; delete this file"
    ):
        read_manifest(root)


def test_a_manifest_of_a_newer_version_is_not_touched(root):
    manifest_path(root).write_text('{"format": 2, "files": {}, "more": 1}')
    with pytest.raises(DamageError, match=r"newer version of this program \(format 2, this one reads 1\)"):
        read_manifest(root)
    with pytest.raises(DamageError, match="newer version"):
        committed(root, lambda change: change.write_text("results/x.txt", "x"))
    assert manifest_path(root).read_text() == '{"format": 2, "files": {}, "more": 1}'
    assert not (root / "results/x.txt").exists()


def test_stages_are_recorded_replaced_and_forgotten(root):
    with Change(root) as change:
        change.record_stage("read:a", StageRecord({"table": "9"}, ()))
        change.forget_stage("look:a")
        change.forget_stage("never")
        change.commit()
    assert read_manifest(root).stages == {"read:a": StageRecord({"table": "9"}, ())}
