"""A change happens as a whole or not at all, wherever it is interrupted."""

import errno
import os
import shutil

import pytest
from store.crashes import CHANGING, Dead, Disk, files_of, make_new, make_old, snapshot

from workbench.errors import BusyError, WorkbenchError
from workbench.store.hashes import check_all, check_file
from workbench.store.manifest import read_manifest
from workbench.store.pending import change_under_way
from workbench.store.recovery import recover


@pytest.fixture(autouse=True)
def quick_disk(monkeypatch):
    """Leave out waiting for the disk: what is killed here is the process, not the machine."""
    monkeypatch.setattr(os, "fsync", lambda _: None)


@pytest.fixture
def places(tmp_path):
    """Return the project before the change, a delivered file, and snapshots before and after."""
    old, new, delivered = tmp_path / "old", tmp_path / "new", tmp_path / "b.tsv"
    old.mkdir()
    delivered.write_text("delivered b")
    make_old(old)
    shutil.copytree(old, new)
    make_new(new, delivered)
    return old, delivered, snapshot(old), snapshot(new)


def interrupted(old, delivered, monkeypatch, **disk):
    """Make the change on a disk that stops; return the project, what was raised, and the steps."""
    root = old.parent / "tried"
    shutil.rmtree(root, ignore_errors=True)
    shutil.copytree(old, root)
    with monkeypatch.context() as patch:
        failing, raised = Disk(patch, **disk), None
        try:
            make_new(root, delivered)
        except (Dead, KeyboardInterrupt, WorkbenchError) as error:
            raised = error
    return root, raised, failing.steps


def test_the_two_states_differ_and_leave_nothing_beside_them(places):
    _, _, before, after = places
    assert before != after
    assert not any(name.endswith((".part", "pending.json")) for name in after)
    assert "results/look" not in after
    assert after["results/main/edges.tsv"] == b"new edges"


def test_killed_before_any_step_recovery_leads_to_the_old_or_the_new_state(places, monkeypatch):
    old, delivered, before, after = places
    total = len(interrupted(old, delivered, monkeypatch)[2])
    assert total > 60
    outcomes = []
    for at in range(1, total + 1):
        root, raised, _ = interrupted(old, delivered, monkeypatch, at=at)
        assert isinstance(raised, Dead)
        recover(root)
        found = snapshot(root)
        assert found in (before, after), f"step {at} of {total}"
        outcomes.append(found == after)
    assert outcomes == sorted(outcomes), "once decided, a change is never lost"
    assert set(outcomes) == {False, True}


def recovery_killed_at(root, monkeypatch, at):
    """Recover on a disk that stops; return whether it came to its end before."""
    with monkeypatch.context() as patch:
        Disk(patch, at=at)
        try:
            recover(root)
        except Dead:
            return False
    return True


def test_recovery_can_be_killed_before_any_of_its_steps(places, monkeypatch):
    old, delivered, before, after = places
    total = len(interrupted(old, delivered, monkeypatch)[2])
    kills = 0
    for at in range(5, total + 1, 6):
        for step in range(1, 100):
            root = interrupted(old, delivered, monkeypatch, at=at)[0]
            finished = recovery_killed_at(root, monkeypatch, step)
            recover(root)
            assert snapshot(root) in (before, after), f"step {at}, recovery's step {step}"
            if finished:
                break
            kills += 1
        assert finished
    assert kills > 50


def test_between_kill_and_recovery_no_file_is_taken_for_damaged(places, monkeypatch):
    old, delivered, _, _ = places
    total = len(interrupted(old, delivered, monkeypatch)[2])
    busy = 0
    for at in range(1, total + 1):
        root = interrupted(old, delivered, monkeypatch, at=at)[0]
        for name in read_manifest(root).files:
            if not (root / name).exists():
                continue
            try:
                check_file(root, name)
            except BusyError:
                busy += 1
    assert busy > 0


@pytest.mark.parametrize("number", [errno.ENOSPC, errno.EACCES, errno.EIO])
def test_one_step_that_fails_leaves_every_file_as_it_was(places, monkeypatch, number):
    old, delivered, before, after = places
    total = len(interrupted(old, delivered, monkeypatch)[2])
    refused = 0
    for at in range(1, total + 1):
        disk = {"at": at, "fail": lambda: OSError(number, "told by the disk"), "once": True}
        root, raised, _ = interrupted(old, delivered, monkeypatch, **disk)
        expected = after if raised is None else before
        refused += raised is not None
        assert not change_under_way(root), f"step {at}"
        assert files_of(snapshot(root, neighbours=False)) == files_of(expected), f"step {at}"
        recover(root)
        assert snapshot(root) == expected, f"step {at}"
    assert refused > total / 2


def test_interrupted_by_the_user_at_any_step_the_state_is_whole_at_once(places, monkeypatch):
    old, delivered, before, after = places
    total = len(interrupted(old, delivered, monkeypatch)[2])
    outcomes = set()
    for at in range(1, total + 1):
        disk = {"at": at, "fail": KeyboardInterrupt, "once": True}
        root, raised, _ = interrupted(old, delivered, monkeypatch, **disk)
        assert isinstance(raised, KeyboardInterrupt)
        found = files_of(snapshot(root, neighbours=False))
        assert found in (files_of(before), files_of(after)), f"step {at}"
        assert not change_under_way(root), f"step {at}"
        outcomes.add(found == files_of(after))
    assert outcomes == {False, True}


def denied():
    return OSError(errno.EPERM, "Operation not permitted")


def test_killed_while_a_change_is_taken_back_recovery_goes_on_with_it(places, monkeypatch):
    old, delivered, before, after = places
    steps = interrupted(old, delivered, monkeypatch)[2]
    targets = [(name, str(arguments[-1])) for name, arguments in steps]
    at = targets.index(("replace", str(old.parent / "tried/results/main/edges.tsv"))) + 1
    taken_back = 0
    for then in range(at + 1, at + 100):
        disk = {"at": at, "fail": denied, "once": True, "then": then}
        root, raised, _ = interrupted(old, delivered, monkeypatch, **disk)
        if not isinstance(raised, Dead):
            break
        begun = (root / ".workbench/undo.json").exists()
        recover(root)
        assert snapshot(root) in ((before,) if begun else (before, after))
        taken_back += begun
    assert "no permission" in str(raised)
    assert taken_back > 5


def test_a_disk_that_stays_full_is_told_once_and_leaves_no_trace(places, monkeypatch):
    old, delivered, before, after = places
    total = len(interrupted(old, delivered, monkeypatch, only=CHANGING)[2])
    for at in range(1, total + 1):
        full = {
            "at": at,
            "fail": lambda: OSError(errno.ENOSPC, "No space left on device"),
            "only": ("mkdir", "link", "write"),
        }
        root, raised, _ = interrupted(old, delivered, monkeypatch, **full)
        if raised is None:
            assert snapshot(root) == after
            continue
        assert str(raised).count("is full; free some space") == 1
        assert str(raised).endswith("nothing was changed")
        assert snapshot(root) == before


def test_a_disk_that_allows_nothing_any_more_is_mended_by_the_next_command(places, monkeypatch):
    old, delivered, before, after = places
    total = len(interrupted(old, delivered, monkeypatch)[2])
    for at in range(1, total + 1, 3):
        root, raised, _ = interrupted(
            old, delivered, monkeypatch, at=at, fail=lambda: OSError(errno.EACCES, "denied")
        )
        assert raised is None or "no permission" in str(raised)
        recover(root)
        assert snapshot(root) in (before, after)
        assert check_all(root) == []


def test_every_new_file_is_on_the_disk_before_the_change_is_decided(places, monkeypatch):
    old, delivered, _, _ = places
    root = old.parent / "watched"
    shutil.copytree(old, root)
    synced, opened = set(), {}
    with monkeypatch.context() as patch:
        disk = Disk(patch)
        real_open, real_fsync = os.open, os.fsync

        def watched_open(path, *arguments, **options):
            handle = real_open(path, *arguments, **options)
            opened[handle] = str(path)
            return handle

        def watched_fsync(handle):
            synced.add((opened[handle], len(disk.steps)))
            real_fsync(handle)

        patch.setattr(os, "open", watched_open)
        patch.setattr(os, "fsync", watched_fsync)
        make_new(root, delivered)
    moves = [
        (number, *arguments)
        for number, (name, arguments) in enumerate(disk.steps)
        if name in ("replace", "rename")
    ]
    decided = next(number for number, _, target in moves if str(target).endswith("pending.json"))
    renamed = [str(part) for number, part, _ in moves if number > decided]
    assert len(renamed) == 7
    on_disk = {path for path, number in synced if number <= decided}
    assert set(renamed) <= on_disk
    assert str(root / "blocks") in on_disk
