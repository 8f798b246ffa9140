"""Where things stand in a project: one place that knows the layout of the directory."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

from workbench.errors import InputError

SETTINGS_NAME = "project.toml"
SAMPLES_NAME = "samples.tsv"
JOURNAL_NAME = "journal.jsonl"
HIDDEN_NAME = ".workbench"

PERSONS_FILES = (SETTINGS_NAME, SAMPLES_NAME)
"""Files at the top that a person edits."""

_NAMES_FILE = re.compile(r"source/[A-Za-z0-9_-]+_names\.tsv")

DERIVED_FOLDERS = ("blocks", "prepared", "results")
"""Folders whose files can be made again; one that is missing is stale, not damaged."""

FOLDERS = ("source", *DERIVED_FOLDERS)
"""All folders that the program writes to, besides the project's root."""


def is_persons(relative: str) -> bool:
    """Return whether a person edits the file: a change in it is an edit, never damage.

    Examples
    --------
    >>> is_persons("project.toml"), is_persons("source/lcms_names.tsv"), is_persons("source/counts.tsv")
    (True, True, False)
    """
    return relative in PERSONS_FILES or _NAMES_FILE.fullmatch(relative) is not None


@dataclass(frozen=True)
class ProjectPaths:
    """The places of one project.

    Parameters
    ----------
    root : Path
        The directory that holds ``project.toml``.

    Examples
    --------
    >>> ProjectPaths(Path("study")).block("lipids").as_posix()
    'study/blocks/lipids.h5ad'
    """

    root: Path

    @property
    def settings(self) -> Path:
        """``project.toml``."""
        return self.root / SETTINGS_NAME

    @property
    def samples(self) -> Path:
        """``samples.tsv``, the sample sheet."""
        return self.root / SAMPLES_NAME

    @property
    def source(self) -> Path:
        """Folder of the delivered tables."""
        return self.root / "source"

    @property
    def blocks(self) -> Path:
        """Folder of the measured values."""
        return self.root / "blocks"

    @property
    def prepared(self) -> Path:
        """Folder of the prepared values."""
        return self.root / "prepared"

    @property
    def results(self) -> Path:
        """Folder of the results."""
        return self.root / "results"

    @property
    def journal(self) -> Path:
        """``journal.jsonl``."""
        return self.root / JOURNAL_NAME

    @property
    def hidden(self) -> Path:
        """Folder of the lock, the manifest and a change that is under way."""
        return self.root / HIDDEN_NAME

    def block(self, name: str) -> Path:
        """Return the file of a block's measured values."""
        return self.blocks / f"{name}.h5ad"

    def prepared_block(self, name: str) -> Path:
        """Return the file of a block's prepared values."""
        return self.prepared / f"{name}.h5ad"

    def analysis(self, name: str) -> Path:
        """Return the folder of an analysis's results."""
        return self.results / name

    def look(self, name: str) -> Path:
        """Return the folder of what is shown about one block on its own."""
        return self.results / "look" / name

    def relative(self, path: Path) -> str:
        """Return a path below the root as the manifest writes it: relative, with ``/``."""
        return path.relative_to(self.root).as_posix()


def find_project(start: Path) -> ProjectPaths:
    """Return the project that a folder belongs to: the nearest one upwards with ``project.toml``.

    Parameters
    ----------
    start : Path
        A folder, or a file in one.

    Raises
    ------
    InputError
        When neither the folder nor one above it is a project.
    """
    here = start.resolve()
    for folder in (here, *here.parents):
        if (folder / SETTINGS_NAME).is_file():
            return ProjectPaths(folder)
    raise InputError(
        f"no {SETTINGS_NAME} in {here} or a folder above it; go to a project's folder, name one with "
        f"--project DIR, or make one with `workbench init DIR`"
    )


def check_relative(relative: str) -> str:
    """Return a path that the program may write to, relative to a project's root.

    Allowed are files at the top (not hidden ones) and files below the folders `FOLDERS`.

    Raises
    ------
    InputError
        When the path is absolute, leaves the project, or stands elsewhere in it.

    Examples
    --------
    >>> check_relative("results/main/edges.tsv")
    'results/main/edges.tsv'
    """
    parts = PurePosixPath(relative).parts
    clean = "/".join(parts) == relative and "\\" not in relative and "\0" not in relative
    if not parts or not clean or any(part in (".", "..", "/") or part.startswith(".") for part in parts):
        raise InputError(
            f"{relative!r} is no place in a project; allowed: a relative path without '..' and hidden names"
        )
    if len(parts) > 1 and parts[0] not in FOLDERS:
        raise InputError(
            f"{relative!r} is no place in a project; allowed: the top, or below {', '.join(FOLDERS)}"
        )
    return relative
