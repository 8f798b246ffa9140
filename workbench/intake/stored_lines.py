"""Lines of a large text file, left in the file and read when they are asked for."""

from __future__ import annotations

import codecs
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import overload

import numpy as np

from workbench.errors import InputError

_CHUNK = 2**20
_LINES_AT_ONCE = 64
_NEWLINE = ord("\n")


@dataclass(frozen=True)
class StoredLines(Sequence[str]):
    """Lines of a UTF-8 file by their places in it, so that memory holds few of them at a time.

    Attributes
    ----------
    path
        The file.
    starts
        Where each line starts, and where the last one ends.
    """

    path: Path
    starts: np.ndarray
    _held: dict[int, list[str]] = field(default_factory=dict, repr=False, compare=False)

    def __len__(self) -> int:
        return len(self.starts) - 1

    @overload
    def __getitem__(self, index: int) -> str: ...

    @overload
    def __getitem__(self, index: slice) -> Sequence[str]: ...

    def __getitem__(self, index: int | slice) -> str | Sequence[str]:
        if isinstance(index, slice):
            first, last, step = index.indices(len(self))
            if step != 1:
                return [self[i] for i in range(first, last, step)]
            return replace(self, starts=self.starts[first : max(first, last) + 1], _held={})
        i = range(len(self))[index]
        block = i // _LINES_AT_ONCE
        if block not in self._held:
            self._held.clear()
            self._held[block] = self._read(block * _LINES_AT_ONCE)
        return self._held[block][i % _LINES_AT_ONCE]

    def _read(self, first: int) -> list[str]:
        last = min(first + _LINES_AT_ONCE, len(self))
        start, end = int(self.starts[first]), int(self.starts[last])
        try:
            with self.path.open("rb") as file:
                file.seek(start)
                lines = file.read(end - start).decode("utf-8").replace("\r\n", "\n").split("\n")
        except (OSError, UnicodeDecodeError):
            lines = []
        lines = lines[:-1] if lines and not lines[-1] else lines
        if len(lines) != last - first:
            raise InputError(f"{self.path}: the file changed while it was read; read it again")
        return lines


def stored_lines(path: Path, skipped: int = 0) -> StoredLines | None:
    r"""Return the lines of a file when it is plain UTF-8, with ``\n`` or ``\r\n`` at the ends of lines, else None.

    Plain: no bytes that are no UTF-8, no NUL, no sign of lost letters (U+FFFD). Blank lines at the end are left
    out.
    """
    decoder = codecs.getincrementaldecoder("utf-8")("strict")
    ends, place = [np.array([skipped])], skipped
    try:
        with path.open("rb") as file:
            file.seek(skipped)
            while chunk := file.read(_CHUNK):
                chunk += file.read(1) if chunk.endswith(b"\r") else b""
                text = decoder.decode(chunk)
                if "\0" in text or "\ufffd" in text or chunk.count(b"\r") != chunk.count(b"\r\n"):
                    return None
                ends.append(np.flatnonzero(np.frombuffer(chunk, np.uint8) == _NEWLINE) + place + 1)
                place += len(chunk)
        decoder.decode(b"", final=True)
    except (OSError, UnicodeDecodeError):
        return None
    starts = np.concatenate(ends)
    starts = starts if starts[-1] == place else np.append(starts, place)
    lines: Sequence[str] = StoredLines(path, starts)
    while lines and not lines[-1].strip(" "):
        lines = lines[:-1]
    return lines if isinstance(lines, StoredLines) and lines else None
