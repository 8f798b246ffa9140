"""A disk that stops working at a chosen step, and a project to try it on."""

import io
import os

import pytest

from workbench.store.manifest import StageRecord
from workbench.store.transaction import Change

STEPS = ("replace", "rename", "unlink", "link", "mkdir", "rmdir", "open", "write", "fsync", "chmod")
CHANGING = ("replace", "rename", "link", "mkdir", "write")
TIME = "2026-01-02T03:04:05Z"


class Dead(BaseException):
    """What a killed process does: nothing any more."""


class Disk:
    """The disk's steps, counted; from step ``at`` on (or at it alone) each raises what ``fail`` makes.

    From step ``then`` on the process is dead.
    """

    def __init__(self, monkeypatch, at=None, fail=Dead, *, once=False, only=STEPS, then=None):
        self.steps = []
        self.at, self.fail, self.once, self.only, self.then = at, fail, once, only, then
        for name in STEPS:
            monkeypatch.setattr(os, name, self._counted(name, getattr(os, name)))
        monkeypatch.setattr(io, "open", self._opened(io.open))

    def _counted(self, name, real):
        def step(*arguments, **options):
            self._take(name, arguments, real)
            return None if name == "fsync" else real(*arguments, **options)

        return step

    def _opened(self, real):
        def step(file, mode="r", *arguments, **options):
            if set(mode) & set("wxa+"):
                self._take("open", (file,), None)
            return real(file, mode, *arguments, **options)

        return step

    def _take(self, name, arguments, real):
        if name not in self.only:
            return
        self.steps.append((name, arguments))
        number = len(self.steps)
        if self.then is not None and number >= self.then:
            raise Dead
        if self.at is None or number < self.at or (self.once and number > self.at):
            return
        if name == "write" and number == self.at:
            real(arguments[0], bytes(arguments[1])[: len(arguments[1]) // 2])
        raise self.fail()


def make_old(root):
    """Make a project with one change behind it."""
    with Change(root) as change:
        change.write_text("project.toml", "# mine\nformat = 1\n")
        change.write_text("source/a.tsv", "delivered a")
        change.write_text("blocks/a.h5ad", "block a")
        change.write_text("results/main/edges.tsv", "old edges")
        change.write_text("results/main/private.tsv", "old private")
        change.write_text("results/look/a/scores.tsv", "old scores")
        change.record_stage("read:a", StageRecord({"table": "1"}, ("blocks/a.h5ad",)))
        change.record_stage("look:a", StageRecord({"block": "2"}, ("results/look/a/scores.tsv",)))
        change.commit({"command": "first", "time": TIME})


def make_new(root, delivered):
    """Make a change of every sort: new, replaced, removed, a new folder, a folder gone, stages, journal."""
    with Change(root) as change:
        change.write_text("project.toml", "# mine\nformat = 1\n[blocks.b]\n")
        change.copy_in(delivered, "source/b.tsv")
        change.new_file("blocks/b.h5ad").write_bytes(b"block b")
        change.write_text("results/main/edges.tsv", "new edges")
        change.write_text("results/main/figures/circle.svg", "new figure")
        change.remove("results/main/private.tsv")
        change.remove("results/look/a")
        change.record_stage("read:b", StageRecord({"table": "3"}, ("blocks/b.h5ad",)))
        change.forget_stage("look:a")
        change.commit({"command": "second", "time": TIME})


def snapshot(root, *, neighbours=True):
    """Return every file with its content and every folder of a project, but for the lock's files."""
    found = {}
    for path in sorted(root.rglob("*")):
        relative = path.relative_to(root).as_posix()
        if relative.endswith(("/lock", "/holder.json")) or (not neighbours and path.name.endswith(".part")):
            continue
        found[relative] = path.read_bytes() if path.is_file() else None
    return found


def files_of(found):
    """Return what a person sees of a snapshot: files, but neither folders nor what is hidden."""
    return {
        name: data for name, data in found.items() if data is not None and not name.startswith(".workbench")
    }


def committed(root, write):
    """Make a change of what ``write`` does with it."""
    with Change(root) as change:
        write(change)
        change.commit({"command": "made", "time": TIME})


def decided(root, monkeypatch, write):
    """Make a change and be killed as soon as it is decided."""

    def stop(*_):
        raise Dead("decided")

    with monkeypatch.context() as patch:
        patch.setattr("workbench.store.transaction.finish", stop)
        with pytest.raises(Dead, match="decided"):
            committed(root, write)
