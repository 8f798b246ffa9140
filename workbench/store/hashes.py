"""Hashes of stored files, and what it means when one does not fit."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from workbench.errors import BusyError, DamageError, InputError
from workbench.store.files import sha256_of
from workbench.store.journal import source_hashes
from workbench.store.manifest import read_manifest
from workbench.store.paths import DERIVED_FOLDERS, ProjectPaths, is_persons
from workbench.store.pending import change_under_way

__all__ = ["FileFault", "check_all", "check_file", "is_derived", "sha256_of", "sha256_of_bytes"]


@dataclass(frozen=True)
class FileFault:
    """One stored file that is not what the program wrote.

    Attributes
    ----------
    file : str
        Relative to the project.
    fault : {"changed", "missing", "unreadable"}
    way_out : str
        What to do about it.
    """

    file: str
    fault: Literal["changed", "missing", "unreadable"]
    way_out: str

    def __str__(self) -> str:
        words = {
            "changed": "is not what the program wrote (its sha256 differs)",
            "missing": "is missing",
            "unreadable": "cannot be read",
        }
        return f"{self.file}: {words[self.fault]}; {self.way_out}"


def sha256_of_bytes(data: bytes) -> str:
    """Return the sha256 of some bytes, 64 hexadecimal digits.

    Examples
    --------
    >>> sha256_of_bytes(b"")[:16]
    'e3b0c44298fc1c14'
    """
    return hashlib.sha256(data).hexdigest()


def is_derived(relative: str) -> bool:
    """Return whether a stored file can be made again from the sources.

    Examples
    --------
    >>> is_derived("results/main/edges.tsv"), is_derived("source/counts.tsv")
    (True, False)
    """
    return relative.split("/", 1)[0] in DERIVED_FOLDERS


def check_file(root: Path, relative: str) -> Path:
    """Return the path of a stored file whose bytes are those that the program wrote.

    ``project.toml`` and ``samples.tsv`` are a person's: any content is right. A file below ``source/``
    that the manifest does not list is looked up in the journal, and one that neither lists was laid there
    by a person.

    Raises
    ------
    DamageError
        When the bytes are others, the file cannot be read, or a source is missing.
    InputError
        When a derived file is missing or unknown to the manifest: it has to be made again.
    BusyError
        When another command is just replacing the file, or was stopped while it did.
    """
    path = ProjectPaths(root).root / relative
    if is_persons(relative):
        return path
    expected = _recorded(root, relative)
    fault = _fault_of(root, relative, expected)
    if fault is not None and _recorded(root, relative) != expected:
        # Another command has replaced the file in between; what it wrote now counts.
        fault = _fault_of(root, relative, _recorded(root, relative))
    if fault is not None:
        raise _told(root, fault)
    return path


def check_all(root: Path) -> list[FileFault]:
    """Return every stored file that is damaged, by name; files that are stale or a person's are none.

    Raises
    ------
    DamageError
        When the manifest itself cannot be read.
    """
    recorded = {**source_hashes(root), **read_manifest(root).files}
    faults = []
    for relative, expected in sorted(recorded.items()):
        gone = not (root / relative).exists()
        if is_persons(relative) or (gone and is_derived(relative)):
            continue
        fault = _fault_of(root, relative, expected)
        if fault is not None:
            faults.append(fault)
    return faults


def _recorded(root: Path, relative: str) -> str | None:
    expected = read_manifest(root).files.get(relative)
    return source_hashes(root).get(relative) if expected is None else expected


def _fault_of(root: Path, relative: str, expected: str | None) -> FileFault | None:
    try:
        if expected is None:
            known = not is_derived(relative) and (root / relative).exists()
            return None if known else FileFault(relative, "missing", _way_out(relative))
        found = sha256_of(root / relative)
    except (FileNotFoundError, NotADirectoryError):
        return FileFault(relative, "missing", _way_out(relative))
    except OSError as error:
        return FileFault(relative, "unreadable", f"{error.strerror}; give yourself the right to read it")
    return None if found == expected else FileFault(relative, "changed", _way_out(relative))


def _way_out(relative: str) -> str:
    if is_derived(relative):
        return "delete it and run `workbench run`: it is made again from the sources"
    return "restore the delivered file, or import it anew with `workbench add-block NAME FILE --replace`"


def _told(root: Path, fault: FileFault) -> InputError | DamageError | BusyError:
    """Return the error that a fault is: stale, damaged, or in the middle of a change."""
    place = root / fault.file
    if change_under_way(root):
        return BusyError(
            f"{place}: another command is just replacing it, or was stopped while it did; wait for it, "
            f"or run `workbench run`, which finishes what was begun"
        )
    if fault.fault == "missing" and is_derived(fault.file):
        state = "is not in the list of stored files" if place.exists() else "is missing"
        return InputError(f"{place}: {state}; run `workbench run`: it is made again from the sources")
    return DamageError(f"{root / str(fault)}")
