"""The list of a change's steps, written before the first of them: what a kill interrupts is finished from it.

``.workbench/pending.json`` stands from the moment when a change is decided until its last step is done.
Renamed to ``undo.json`` it says that a step was impossible and that the steps done are being taken back.
"""

from __future__ import annotations

import dataclasses
import json
from collections.abc import Iterable
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import DamageError, InputError
from workbench.store.files import is_part, sha256_of, sync_folder, sync_folders, unlink_if_there, write_whole
from workbench.store.manifest import MANIFEST_NAME
from workbench.store.paths import HIDDEN_NAME, PERSONS_FILES, ProjectPaths, check_relative

FORMAT = 1
PENDING_NAME = "pending.json"
UNDO_NAME = "undo.json"
MANIFEST_RELATIVE = f"{HIDDEN_NAME}/{MANIFEST_NAME}"


@dataclass(frozen=True)
class Step:
    """One file of a change: replaced by its new version, or removed.

    Attributes
    ----------
    file : str
        Relative to the project, as are ``part`` and ``old``.
    part : str or None
        The new version; None: the file is removed.
    old : str or None
        A second name of the version that is replaced; None: there is none.
    sha256 : str or None
        Of the new version.
    before : str or None
        sha256 of the version that is replaced, for the files that a person edits.
    """

    file: str
    part: str | None = None
    old: str | None = None
    sha256: str | None = None
    before: str | None = None


def change_under_way(root: Path) -> bool:
    """Return whether a change is decided but not done: a command is at it, or was killed."""
    hidden = ProjectPaths(root).hidden
    return (hidden / PENDING_NAME).exists() or (hidden / UNDO_NAME).exists()


def write_pending(root: Path, steps: Iterable[Step]) -> None:
    """Decide a change: from here on it happens as a whole."""
    content = {"format": FORMAT, "steps": [dataclasses.asdict(step) for step in steps]}
    write_whole(ProjectPaths(root).hidden / PENDING_NAME, (json.dumps(content, indent=1) + "\n").encode())


def read_steps(path: Path) -> tuple[Step, ...] | None:
    """Return the steps that a list holds; None when it is not a whole one.

    Every path is checked: a list that someone else made cannot reach outside a project.

    Raises
    ------
    DamageError
        When a newer version of the program wrote it: only that one can finish its change.
    """
    try:
        content = json.loads(path.read_bytes())
        if content["format"] > FORMAT:
            raise DamageError(
                f"{path}: a newer version of this program began a change; finish it with that one"
            )
        return tuple(_checked(Step(**step)) for step in content["steps"])
    except (InputError, ValueError, KeyError, TypeError, RecursionError):
        return None


def _checked(step: Step) -> Step:
    if step.file != MANIFEST_RELATIVE:
        check_relative(step.file)
    folder = step.file.rpartition("/")[0]
    for neighbour in (step.part, step.old):
        if neighbour is not None and (neighbour.rpartition("/")[0] != folder or not _is_part(neighbour)):
            raise ValueError(f"{neighbour} is no neighbour of {step.file}")
    return step


def _is_part(relative: str) -> bool:
    return is_part(relative.rpartition("/")[2])


def take_steps(root: Path, steps: Iterable[Step]) -> None:
    """Replace and remove the files of a change; steps that are done already are passed over.

    Raises
    ------
    OSError
        When a step is impossible.
    """
    done = tuple(steps)
    for step in done:
        if step.part is None:
            unlink_if_there(root / step.file)
        elif (root / step.part).exists():
            (root / step.part).replace(root / step.file)
    sync_folders(root, [step.file for step in done])


def take_back(root: Path, steps: Iterable[Step]) -> None:
    """Put every file of a change back to what it was before; steps that were not taken are passed over.

    Raises
    ------
    OSError
        When a file cannot be put back; running this again goes on where it stopped.
    """
    done = tuple(steps)
    for step in done:
        if not _was_taken(root, step):
            continue
        if step.old is None:
            unlink_if_there(root / step.file)
        elif (root / step.old).exists():
            (root / step.old).replace(root / step.file)
    sync_folders(root, [step.file for step in done])


def _was_taken(root: Path, step: Step) -> bool:
    """Return whether a file is as the step left it; one that a person edited since is not."""
    found = hash_if_there(root / step.file)
    return found == step.sha256


def can_be_finished(root: Path, steps: Iterable[Step]) -> bool:
    """Return whether all steps can still be taken.

    They cannot when a new version is not whole, or when a person has edited, since the change was decided,
    a file that it would replace.
    """
    return all(_can_be_taken(root, step) for step in steps)


def _can_be_taken(root: Path, step: Step) -> bool:
    if step.part is None:
        return True
    part, file = hash_if_there(root / step.part), hash_if_there(root / step.file)
    if step.file in PERSONS_FILES:
        was_taken = part is None and file != step.before
        return was_taken or (part == step.sha256 and file in (step.before, step.sha256))
    return step.sha256 in (part, file)


def hash_if_there(path: Path) -> str | None:
    """Return the sha256 of a file; None when it is missing."""
    try:
        return sha256_of(path)
    except FileNotFoundError:
        return None


def forget_pending(root: Path, name: str = PENDING_NAME) -> None:
    """Take the list of steps away: the change is done, or taken back."""
    hidden = ProjectPaths(root).hidden
    unlink_if_there(hidden / name)
    with suppress(OSError):
        sync_folder(hidden)


def turn_back(root: Path) -> None:
    """Say on the disk that the change is being taken back, in one rename."""
    hidden = ProjectPaths(root).hidden
    (hidden / PENDING_NAME).replace(hidden / UNDO_NAME)
    sync_folder(hidden)
