"""The journal: one line of JSON for each command that changed the project."""

from __future__ import annotations

import json
from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from workbench import __version__
from workbench.errors import DamageError
from workbench.store.files import write_whole
from workbench.store.paths import ProjectPaths
from workbench.store.plain import plain

SOURCES_KEY = "sources"
"""Key of a journal line that lists the delivered files that the command stored: ``file`` and ``sha256`` of each."""


def journal_line(entry: Mapping[str, Any]) -> bytes:
    r"""Return one line of the journal: time (UTC) and version first, then what the command says.

    Examples
    --------
    >>> journal_line({"command": "init", "time": "2026-01-02T03:04:05Z", "version": "1"})
    b'{"time": "2026-01-02T03:04:05Z", "version": "1", "command": "init"}\n'
    """
    now = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    whole = {"time": now, "version": __version__} | plain(entry)
    # A lone surrogate (a file name that is not UTF-8) becomes the escape that JSON has for it.
    return (json.dumps(whole, ensure_ascii=False) + "\n").encode("utf-8", "backslashreplace")


def journal_with(root: Path, entry: Mapping[str, Any]) -> bytes:
    """Return the whole journal with one more line; a torn last line is mended first."""
    return mended(_journal_bytes(root)) + journal_line(entry)


def append(root: Path, entry: Mapping[str, Any]) -> None:
    """Add a line to the journal; the file is replaced whole, so that no line is ever torn.

    The caller holds the project's lock. `Change.commit` does this as part of a change.

    Raises
    ------
    OSError
        When the disk does not allow it; the journal is then as it was.
    """
    write_whole(ProjectPaths(root).journal, journal_with(root, entry))


def read_journal(root: Path) -> list[dict[str, Any]]:
    """Return the journal's entries, oldest first; a missing journal has none.

    A torn last line (a copy that was cut off) is left out.

    Raises
    ------
    DamageError
        When a line before the last is not JSON.
    """
    entries = []
    for number, line in enumerate(mended(_journal_bytes(root)).splitlines(), start=1):
        entry = _entry_of(line)
        if entry is None and line.strip():
            raise DamageError(
                f"{ProjectPaths(root).journal}: line {number} is not a line of a journal; "
                f"restore the file from a copy, or take this line out"
            )
        if entry is not None:
            entries.append(entry)
    return entries


def source_hashes(root: Path) -> dict[str, str]:
    """Return the sha256 that the journal gives for each delivered file, the latest one.

    Lines that cannot be read are passed over: they cannot vouch for anything.
    """
    hashes: dict[str, str] = {}
    for line in _journal_bytes(root).splitlines():
        hashes |= named_sources(_entry_of(line) or {})
    return hashes


def named_sources(entry: Mapping[str, Any]) -> dict[str, str]:
    """Return the delivered files that one entry of the journal names, with their sha256."""
    listed = entry.get(SOURCES_KEY)
    pairs = [(source.get("file"), source.get("sha256")) for source in _dicts(listed)]
    return {name: digest for name, digest in pairs if isinstance(name, str) and isinstance(digest, str)}


def _dicts(value: Any) -> list[Mapping[str, Any]]:
    return [item for item in value if isinstance(item, Mapping)] if isinstance(value, list | tuple) else []


def mended(data: bytes) -> bytes:
    r"""Return a journal whose last line is whole: completed when only its end is missing, else cut off.

    Examples
    --------
    >>> mended(b'{"command": "init"}\n{"comm')
    b'{"command": "init"}\n'
    """
    head, newline, last = data.rpartition(b"\n")
    if not last:
        return data
    return data + b"\n" if _entry_of(last) is not None else head + newline


def mend(root: Path) -> None:
    """Mend the journal on the disk; one that is whole is not touched."""
    data = _journal_bytes(root)
    whole = mended(data)
    if whole != data:
        write_whole(ProjectPaths(root).journal, whole)


def _journal_bytes(root: Path) -> bytes:
    try:
        return ProjectPaths(root).journal.read_bytes()
    except FileNotFoundError:
        return b""


def _entry_of(line: bytes) -> dict[str, Any] | None:
    try:
        entry = json.loads(line)
    except (ValueError, RecursionError):
        return None
    return entry if isinstance(entry, dict) else None
