"""What the next command does first: finish or take back what a killed one left."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path

from workbench.store import journal
from workbench.store.files import explained, is_part, refused, unlink_if_there
from workbench.store.paths import DERIVED_FOLDERS, FOLDERS, HIDDEN_NAME, ProjectPaths
from workbench.store.pending import (
    PENDING_NAME,
    UNDO_NAME,
    Step,
    can_be_finished,
    forget_pending,
    read_steps,
    take_back,
    take_steps,
    turn_back,
)


def recover(root: Path) -> None:
    """Bring a project to a whole state after a command that was killed; the caller holds the lock.

    A change that was decided is finished, or taken back where finishing is impossible; one that was not is
    dropped. Neighbours that nobody needs, empty folders of derived files and a torn last line of the
    journal go. Being killed itself, at any moment, costs nothing: running it again goes on.

    Raises
    ------
    WorkbenchError
        When the disk allows neither finishing nor taking back.
    """
    try:
        if (ProjectPaths(root).hidden / UNDO_NAME).exists():
            _finish_undo(root)
        _finish_pending(root)
        remove_strays(root)
        journal.mend(root)
    except OSError as error:
        raise explained(error, root) from error


def _finish_pending(root: Path) -> None:
    path = ProjectPaths(root).hidden / PENDING_NAME
    if not path.exists():
        return
    steps = read_steps(path)
    if steps is None:
        forget_pending(root)
    elif can_be_finished(root, steps):
        finish(root, steps)
    else:
        undo(root, steps)


def _finish_undo(root: Path) -> None:
    steps = read_steps(ProjectPaths(root).hidden / UNDO_NAME)
    if steps is not None:
        take_back(root, steps)
    forget_pending(root, UNDO_NAME)


def finish(root: Path, steps: tuple[Step, ...]) -> None:
    """Take all steps of a decided change; where one is impossible, take back all that were taken.

    Raises
    ------
    WorkbenchError
        When the change was taken back, with the reason.
    """
    try:
        take_steps(root, steps)
        forget_pending(root)
    except OSError as error:
        undo(root, steps)
        raise refused(error, root) from error


def undo(root: Path, steps: tuple[Step, ...]) -> None:
    """Take back what was taken of a decided change.

    Raises
    ------
    WorkbenchError
        When the disk does not allow it; the next command goes on with it.
    """
    try:
        turn_back(root)
        take_back(root, steps)
        forget_pending(root, UNDO_NAME)
    except OSError as error:
        reason = explained(error, root)
        raise type(reason)(
            f"{reason}; a change was begun, and the next command finishes it or takes it back"
        ) from error


def remove_strays(root: Path) -> None:
    """Delete neighbours that no change needs, and folders of derived files that are empty.

    Raises
    ------
    OSError
        When the disk does not allow it.
    """
    for folder in _folders(root):
        for entry in list(os.scandir(folder)):
            if is_part(entry.name) and not entry.is_dir(follow_symlinks=False):
                unlink_if_there(Path(entry.path))
    for name in DERIVED_FOLDERS:
        prune(root / name)


def prune(folder: Path) -> None:
    """Remove the folders at and below a place that hold nothing."""
    if not folder.is_dir() or folder.is_symlink():
        return
    for below in sorted(folder.iterdir()):
        prune(below)
    if not any(folder.iterdir()):
        folder.rmdir()


def _folders(root: Path) -> Iterator[Path]:
    """Yield every folder that a change may have written to."""
    yield root
    for name in (HIDDEN_NAME, *FOLDERS):
        for folder, _, _ in os.walk(root / name):
            yield Path(folder)
