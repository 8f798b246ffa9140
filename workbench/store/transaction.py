"""A change of a project: several files, the manifest and the journal, all of it or none.

The order of the steps, each through to the disk before the next:

1. new versions are written beside the files they will replace;
2. the new manifest and the new journal likewise, and second names are given to all files to be replaced;
3. the list of steps is written (`workbench.store.pending`): the change is decided;
4. files are renamed and removed; the list is taken away.

Killed before 3, the change never was; after it, `recover` finishes it.
"""

from __future__ import annotations

import errno
import os
import shutil
import stat
from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import Any, BinaryIO, Self

from workbench.errors import InputError
from workbench.store.files import (
    STORAGE,
    explained,
    make_folders,
    new_token,
    part_of,
    refused,
    sync_file,
    sync_folders,
    unlink_if_there,
    write_new,
)
from workbench.store.hashes import sha256_of, sha256_of_bytes
from workbench.store.journal import SOURCES_KEY, journal_with, named_sources
from workbench.store.manifest import Manifest, StageRecord, manifest_bytes, read_manifest
from workbench.store.paths import DERIVED_FOLDERS, JOURNAL_NAME, PERSONS_FILES, ProjectPaths, check_relative
from workbench.store.pending import (
    MANIFEST_RELATIVE,
    Step,
    change_under_way,
    forget_pending,
    hash_if_there,
    write_pending,
)
from workbench.store.recovery import finish, prune, recover

__all__ = ["Change", "recover"]

_NO_LINKS = frozenset({errno.EPERM, errno.ENOTSUP, errno.EOPNOTSUPP, errno.EMLINK, errno.ENOSYS, errno.EXDEV})


class Change:
    """A change of a project, used as a context manager by whoever holds the project's lock.

    Leaving the block without `commit` (an error, or by intent) drops everything. A failure of the disk inside
    the block, or while committing, becomes a `WorkbenchError`, and every file is as it was.

    Parameters
    ----------
    root : Path
        The project's directory.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     with Change(Path(folder)) as change:
    ...         change.write_text("results/main/note.txt", "kept")
    ...         change.commit({"command": "example"})
    ...     Path(folder, "results/main/note.txt").read_text()
    'kept'
    """

    def __init__(self, root: Path) -> None:
        self._root = root
        self._token = new_token()
        self._new: dict[str, Path] = {}
        self._removed: dict[str, None] = {}
        self._stages: dict[str, StageRecord | None] = {}
        self._olds: list[Path] = []
        self._decided: tuple[Step, ...] | None = None
        self._closed = False

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._decided is not None and change_under_way(self._root):
            if not isinstance(error, Exception):
                finish(self._root, self._decided)
            return
        if not self._closed:
            self._closed = True
            self._drop()
        if isinstance(error, OSError) and error.errno in STORAGE:
            raise refused(error, self._root) from error

    def new_file(self, relative: str) -> Path:
        """Return the path that the caller writes a new version of a file to.

        Parameters
        ----------
        relative : str
            The file, relative to the project: at its top, or below one of its folders.

        Returns
        -------
        Path
            A neighbour of the file, not there yet, in a folder that is.

        Raises
        ------
        InputError
            When the place is not one of the program's, or a folder stands there.
        """
        self._must_be_open()
        target = self._root / check_relative(relative)
        if target.is_dir():
            raise InputError(f"{target}: a folder stands where a file should; rename it")
        self._removed.pop(relative, None)
        self._new[relative] = part_of(target, self._token)
        try:
            make_folders(target.parent)
        except (FileExistsError, NotADirectoryError) as error:
            raise explained(error) from error
        return self._new[relative]

    def write_bytes(self, relative: str, data: bytes) -> None:
        """Give a file new content."""
        part = self.new_file(relative)
        unlink_if_there(part)
        write_new(part, data)

    def write_text(self, relative: str, text: str) -> None:
        """Give a file new content: the text as UTF-8, its line ends as they are."""
        self.write_bytes(relative, text.encode())

    def copy_in(self, source_path: Path, relative: str) -> str:
        """Take a copy of a delivered file, byte for byte, and return its sha256.

        Raises
        ------
        InputError
            When there is no such file, or it is not a plain file (a folder, a device, a pipe).
        """
        with _opened(source_path) as source:
            part = self.new_file(relative)
            unlink_if_there(part)
            with part.open("xb") as copy:
                shutil.copyfileobj(source, copy, 1 << 20)
        return sha256_of(part)

    def remove(self, relative: str) -> None:
        """Take a file away; of a folder, the files that the program wrote. One that is missing is as good."""
        self._must_be_open()
        target = self._root / check_relative(relative)
        files = [relative]
        if target.is_dir():
            files = [name for name in read_manifest(self._root).files if name.startswith(relative + "/")]
        for name in files:
            self._new.pop(name, None)
            self._removed[name] = None

    def record_stage(self, name: str, record: StageRecord) -> None:
        """Note in the manifest what a stage was made from and what it wrote."""
        self._must_be_open()
        for output in record.outputs:
            check_relative(output)
        self._stages[name] = record

    def forget_stage(self, name: str) -> None:
        """Take a stage out of the manifest: it counts as never done."""
        self._must_be_open()
        self._stages[name] = None

    def commit(self, journal: Mapping[str, Any] | None = None) -> None:
        """Make the change happen, as a whole.

        Parameters
        ----------
        journal : mapping, optional
            The line for the journal (``command`` and what it did); time and version are added, and
            the sha256 of every delivered file that the change stores. None: no line.

        Raises
        ------
        WorkbenchError
            When the disk does not allow it; every file is then as it was.
        """
        self._must_be_open()
        if not (self._new or self._removed or self._stages or journal is not None):
            self._closed = True
            return
        try:
            steps = self._prepared_steps(journal)
            self._decided = steps
            write_pending(self._root, steps)
        except OSError as error:
            self._decided = None
            with suppress(OSError):
                forget_pending(self._root)
            raise refused(error, self._root) from error
        finish(self._root, steps)
        self._closed = True
        self._drop()

    def _must_be_open(self) -> None:
        if self._closed or self._decided is not None:
            raise ValueError("this change is committed already; begin another one")

    def _prepared_steps(self, journal: Mapping[str, Any] | None) -> tuple[Step, ...]:
        """Write everything that the change needs beside its files, through to the disk; list the steps."""
        hashes = {name: self._finished_part(name, part) for name, part in self._new.items()}
        make_folders(ProjectPaths(self._root).hidden)
        extra = {MANIFEST_RELATIVE: manifest_bytes(self._changed_manifest(hashes))}
        if journal is not None:
            extra[JOURNAL_NAME] = journal_with(self._root, _with_sources(journal, hashes))
        for name, data in extra.items():
            self._new[name] = part_of(self._root / name, self._token)
            write_new(self._new[name], data)
            hashes[name] = sha256_of_bytes(data)
        steps = [self._replacing(name, digest) for name, digest in hashes.items()]
        steps += [self._removing(name) for name in self._removed if (self._root / name).exists()]
        sync_folders(self._root, [step.file for step in steps])
        return tuple(steps)

    def _finished_part(self, name: str, part: Path) -> str:
        """Bring a new version to the disk, with the rights of the file it replaces, and return its sha256."""
        if not part.is_file():
            raise ValueError(f"{name}: its new version was asked for, and nothing was written to {part}")
        with suppress(FileNotFoundError):
            part.chmod(stat.S_IMODE((self._root / name).stat().st_mode))
        sync_file(part)
        return sha256_of(part)

    def _replacing(self, name: str, digest: str) -> Step:
        target = self._root / name
        before = hash_if_there(target) if name in PERSONS_FILES else None
        return Step(name, self._relative(self._new[name]), self._second_name(target), digest, before)

    def _removing(self, name: str) -> Step:
        return Step(name, old=self._second_name(self._root / name))

    def _second_name(self, target: Path) -> str | None:
        """Give a file that is to go a second name, so that it can come back; without links, a copy."""
        if not target.exists():
            return None
        old = part_of(target, self._token, ".old")
        self._olds.append(old)
        try:
            os.link(target, old)
        except OSError as error:
            if error.errno not in _NO_LINKS:
                raise
            shutil.copy2(target, old)
            sync_file(old)
        return self._relative(old)

    def _relative(self, path: Path) -> str:
        return path.relative_to(self._root).as_posix()

    def _changed_manifest(self, hashes: Mapping[str, str]) -> Manifest:
        old = read_manifest(self._root)
        files = {**old.files, **hashes}
        stages = {**old.stages, **self._stages}
        return Manifest(
            {name: digest for name, digest in files.items() if name not in self._removed},
            {name: record for name, record in stages.items() if record is not None},
        )

    def _drop(self) -> None:
        """Delete the neighbours that are left, and folders that only they were in."""
        with suppress(OSError):
            for path in (*self._new.values(), *self._olds):
                unlink_if_there(path)
            for name in DERIVED_FOLDERS:
                prune(self._root / name)


def _with_sources(journal: Mapping[str, Any], hashes: Mapping[str, str]) -> dict[str, Any]:
    """Return a journal's entry that names every delivered file of the change with its sha256."""
    named = named_sources(journal)
    lacking = [
        {"file": name, "sha256": digest}
        for name, digest in hashes.items()
        if name.startswith("source/") and named.get(name) != digest
    ]
    return dict(journal) | ({SOURCES_KEY: [*journal.get(SOURCES_KEY, ()), *lacking]} if lacking else {})


def _opened(path: Path) -> BinaryIO:
    """Open a delivered file for reading; what is no plain file is refused (a pipe would wait for ever)."""
    try:
        handle = os.open(path, os.O_RDONLY | getattr(os, "O_NONBLOCK", 0))
    except FileNotFoundError as error:
        raise InputError(f"{path}: there is no such file; check the name and the folder") from error
    except OSError as error:
        raise InputError(f"{path}: cannot be read ({error.strerror}); check its rights") from error
    if not stat.S_ISREG(os.fstat(handle).st_mode):
        os.close(handle)
        raise InputError(f"{path}: is not a plain file but a folder, a device or a pipe; name a file")
    return os.fdopen(handle, "rb")
