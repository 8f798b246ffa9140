"""Single steps on the disk: neighbours of a file, writing through to the disk, and errors in plain words.

Names of neighbours: ``.NAME.<16 hexadecimal digits>.part`` for a new version of NAME that is being
written, ``.NAME.<16 hexadecimal digits>.old.part`` for the version it replaces. They are the only files
that a killed command can leave, and the only ones that recovery deletes.
"""

from __future__ import annotations

import errno
import hashlib
import os
import re
import secrets
from collections.abc import Iterable
from pathlib import Path

from workbench.errors import DamageError, StorageError, WorkbenchError

_PART = re.compile(r"\..+\.[0-9a-f]{16}(\.old)?\.part")
_LONGEST = 255 - len("..0123456789abcdef.old.part")
"""Bytes of a name that fit into its neighbour's: 255 is the usual limit of a file name (common practice)."""

FULL = frozenset({errno.ENOSPC, errno.EDQUOT, errno.EFBIG})
DENIED = frozenset({errno.EACCES, errno.EPERM})
STORAGE = FULL | DENIED | {errno.EROFS, errno.EIO, errno.ENAMETOOLONG, errno.EMFILE, errno.ENFILE}
"""Error numbers that speak of the disk, not of a mistake in the program."""


def new_token() -> str:
    """Return 16 random hexadecimal digits that tell one change's neighbours from another's."""
    return secrets.token_hex(8)


def part_of(path: Path, token: str, suffix: str = "") -> Path:
    """Return the neighbour of a file that a change writes to.

    Examples
    --------
    >>> part_of(Path("results/edges.tsv"), "0" * 16).as_posix()
    'results/.edges.tsv.0000000000000000.part'
    """
    name = path.name.encode()[:_LONGEST].decode(errors="ignore")
    return path.with_name(f".{name}.{token}{suffix}.part")


def is_part(name: str) -> bool:
    """Return whether a file name is one of a neighbour.

    Examples
    --------
    >>> is_part(".edges.tsv.0123456789abcdef.part"), is_part("film.part")
    (True, False)
    """
    return _PART.fullmatch(name) is not None


def file_of(path: Path) -> Path:
    """Return the file that a path is a neighbour of, or the path itself (a long name may lack its end).

    Examples
    --------
    >>> file_of(Path("results/.edges.tsv.0123456789abcdef.part")).as_posix()
    'results/edges.tsv'
    """
    if not is_part(path.name):
        return path
    return path.with_name(path.name[1:].removesuffix(".part").removesuffix(".old").rpartition(".")[0])


def sha256_of(path: Path) -> str:
    """Return the sha256 of a file's bytes, 64 hexadecimal digits.

    Raises
    ------
    OSError
        When the file cannot be read.
    """
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def sync_file(path: Path) -> None:
    """Write a file's content through to the disk."""
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def sync_folder(folder: Path) -> None:
    """Write a folder's list of names through to the disk, where the system can."""
    if os.name == "nt":
        return
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    except OSError as error:
        if error.errno not in (errno.EINVAL, errno.ENOTSUP):
            raise
    finally:
        os.close(handle)


def sync_folders(root: Path, files: Iterable[str]) -> None:
    """Write the folders of some files of a project through to the disk, up to the project's own."""
    folders = {parent for file in files for parent in (root / file).relative_to(root).parents}
    for folder in sorted(folders, reverse=True):
        if (root / folder).is_dir():
            sync_folder(root / folder)


def write_new(path: Path, data: bytes | memoryview) -> None:
    """Write a file that is not there yet, through to the disk."""
    handle = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o666)
    try:
        view = memoryview(data)
        while view:
            view = view[os.write(handle, view) :]
        os.fsync(handle)
    finally:
        os.close(handle)


def write_whole(path: Path, data: bytes | memoryview) -> None:
    """Write a file whole or not at all: a neighbour, through to the disk, then renamed."""
    part = part_of(path, new_token())
    try:
        write_new(part, data)
        part.replace(path)
    except OSError:
        unlink_if_there(part)
        raise
    sync_folder(path.parent)


def unlink_if_there(path: Path) -> None:
    """Delete a file; one that is missing is as good."""
    path.unlink(missing_ok=True)


def make_folders(folder: Path) -> None:
    """Make a folder and those above it."""
    folder.mkdir(parents=True, exist_ok=True)


def explained(error: OSError, path: Path | str | None = None) -> WorkbenchError:
    """Return what a failure of the disk means to the user, and the way out.

    Parameters
    ----------
    error : OSError
    path : Path or str, optional
        Shown where the error itself names no file.

    Returns
    -------
    WorkbenchError
        A `DamageError` when the disk itself fails, else a `StorageError`.
    """
    where = error.filename if error.filename is not None else path
    prefix = "" if where is None else f"{file_of(Path(os.fsdecode(where)))}: "
    number = error.errno
    if number in FULL:
        told = "the disk (or your share of it) is full; free some space and run the command again"
    elif number in DENIED:
        told = "no permission; get the right to write to this file and its folder, then run the command again"
    elif number == errno.EROFS:
        told = "the file system is read-only; copy the project to a place that can be written"
    elif number == errno.EIO:
        return DamageError(
            f"{prefix}the disk reports a failure; copy the project to another disk and try again there"
        )
    elif number in (errno.EISDIR, errno.ENOTDIR, errno.EEXIST):
        told = "a folder stands where a file should, or a file where a folder should; rename it"
    else:
        told = f"{error.strerror or error}; mend this and run the command again"
    return StorageError(f"{prefix}{told}")


def refused(error: OSError, path: Path) -> WorkbenchError:
    """Return `explained` with the comfort that every file is as it was."""
    told = explained(error, path)
    return type(told)(f"{told}; nothing was changed")
