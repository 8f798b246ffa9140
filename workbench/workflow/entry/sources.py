"""Delivered files: kept byte for byte under ``source/``, and known again by their hash."""

from __future__ import annotations

import re
from pathlib import Path

from workbench.errors import InputError
from workbench.store import Change, ProjectPaths, check_file, read_manifest, sha256_of
from workbench.store.paths import is_persons


def delivered_file(path: Path) -> Path:
    """Return the path if a delivered file can be read there; `InputError` says what is wrong otherwise."""
    if not path.exists():
        raise InputError(f"{path}: no such file (working folder: {Path.cwd()})")
    if path.is_dir():
        raise InputError(f"{path}: a folder, not a table; name the file")
    try:
        with path.open("rb") as file:
            file.read(1)
    except OSError as error:
        raise InputError(f"{path}: cannot be read ({error.strerror}); check its permissions") from error
    return path


def keep_source(change: Change, paths: ProjectPaths, delivered: Path) -> tuple[str, str]:
    """Copy a delivered file into ``source/`` and return its project path and sha256.

    The same bytes under the same name are kept once; other bytes get a numbered name.
    """
    digest = sha256_of(delivered)
    plain = re.sub(r"[^\w.()+-]+", "_", delivered.name).lstrip(".") or "table"
    candidate, number = plain, 1
    while (paths.source / candidate).exists():
        if sha256_of(paths.source / candidate) == digest:
            return f"source/{candidate}", digest
        number += 1
        stem, dot, ending = plain.partition(".")
        candidate = f"{stem}-{number}{dot}{ending}"
    change.copy_in(delivered, f"source/{candidate}")
    return f"source/{candidate}", digest


def source_hash(paths: ProjectPaths, relative: str) -> str:
    """Return the sha256 of a kept source file; raise `DamageError` when it is not what was delivered."""
    path = check_file(paths.root, relative)
    if is_persons(relative):
        return sha256_of(path)
    return read_manifest(paths.root).files.get(relative) or sha256_of(path)
