"""Opening delivered files: what the first bytes say the format is, and bytes to checked text lines."""

from __future__ import annotations

import gzip
import io
import zlib
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

from .encodings import Encoding, decoder_for, encoding_error, first_encoding, western_encoding
from .stored_lines import StoredLines, stored_lines

LARGEST_TEXT = 8 * 2**30
_LARGE = 2**26
_CHUNK = 2**20
_FOREIGN = (
    (
        b"\xd0\xcf\x11\xe0",
        "an old Excel file (.xls), or one with a password",
        "save it as .xlsx without a password",
    ),
    (b"%PDF", "a PDF file", "ask for the table itself"),
    (b"{\\rtf", "a rich-text document", "save it as plain text"),
    *((b"BZh%d1AY&SY" % level, "compressed (bzip2)", "unpack it first") for level in range(1, 10)),
    (b"\xfd7zXZ", "compressed (xz)", "unpack it first"),
    (b"(\xb5/\xfd", "compressed (zstd)", "unpack it first"),
    (b"<!DOCTYPE", "a web page", "save the table as TSV, CSV or XLSX"),
    (b"<html", "a web page", "save the table as TSV, CSV or XLSX"),
    (b"<?xml", "an XML file", "save the table as TSV, CSV or XLSX"),
)


def sniff(path: Path) -> str:
    """Return ``zip``, ``hdf5``, ``parquet`` or ``text`` by the first bytes of a file; its name plays no part.

    Raises
    ------
    InputError
        When there is no such file, it cannot be read, is empty, or is of a kind that is not read here.
    """
    start = _first_bytes(path)
    if not start:
        raise InputError(f"{path}: the file is empty; a table needs a header line and rows")
    for signature, what, way_out in _FOREIGN:
        if start.lower().startswith(signature.lower()):
            raise InputError(
                f"{path}: this is {what}, not a table in TSV, CSV, XLSX, .h5ad or Parquet; {way_out}"
            )
    if start.startswith(b"PK\x03\x04"):
        return "zip"
    if start.startswith(b"\x89HDF\r\n\x1a\n"):
        return "hdf5"
    return "parquet" if start.startswith(b"PAR1") else "text"


def _first_bytes(path: Path) -> bytes:
    try:
        with path.open("rb") as file:
            return file.read(64)
    except FileNotFoundError:
        raise InputError(f"{path}: there is no such file; check the path") from None
    except IsADirectoryError:
        raise InputError(f"{path}: this is a folder, not a file; name the table inside it") from None
    except OSError as error:
        raise InputError(
            f"{path}: the file cannot be read ({error.strerror}); check its permissions"
        ) from None


@dataclass(frozen=True)
class TextLines:
    """Lines of a text file without their ends, and what was accepted knowingly."""

    lines: Sequence[str]
    notes: tuple[str, ...]


def read_lines(path: Path) -> TextLines:
    r"""Return the lines of a text file (plain or .gz); blank lines at the end are left out.

    The text is UTF-8, else UTF-16, else Windows-1252, the latter two only where the bytes leave no doubt, and
    told. Line ends may be ``\\n``, ``\\r\\n`` or ``\\r``; no other character ends a line. A byte-order mark is
    accepted and told. The lines of a large plain file stay in it until they are asked for; others stand in
    memory once.

    Raises
    ------
    InputError
        When the encoding is not certain (with line and character), the bytes hold NUL characters, or the file
        holds no line.
    """
    notes = [f"{path.name}: compressed with gzip; read as the text inside"] if _is_packed(path) else []
    encoding = first_encoding(_start(path))
    stored = _stored(path, encoding)
    if stored is not None:
        return TextLines(stored, tuple(f"{path.name}: {note}" for note in encoding.notes))
    try:
        text = _split(path, encoding)
    except UnicodeDecodeError:
        encoding = _other_encoding(path, encoding)
        text = _split(path, encoding)
    notes += [f"{path.name}: {note}" for note in (*encoding.notes, *text.notes)]
    lines = text.lines
    while lines and not lines[-1].strip(" "):
        lines = lines[:-1]
    if not lines:
        raise InputError(f"{path}: the file holds no text; a table needs a header line and rows")
    return TextLines(lines, tuple(notes))


def _stored(path: Path, encoding: Encoding) -> StoredLines | None:
    size = path.stat().st_size
    if encoding.name != "utf-8" or not _LARGE <= size <= LARGEST_TEXT or _is_packed(path):
        return None
    return stored_lines(path, encoding.skipped)


def _split(path: Path, encoding: Encoding) -> TextLines:
    decoder = io.IncrementalNewlineDecoder(decoder_for(encoding), translate=True)
    lines: list[str] = []
    rest, lost = "", 0
    for chunk, last in _with_last(_pieces(path, encoding.skipped)):
        parts = (rest + decoder.decode(chunk, final=last)).split("\n")
        rest = parts.pop()
        _refuse_nul(path, parts if rest.find("\0") < 0 else [*parts, rest], len(lines))
        lost = lost or _first_with("\ufffd", parts, len(lines))
        lines += parts
    lost = lost or _first_with("\ufffd", [rest], len(lines))
    notes = [f"letters were lost in an earlier conversion (\ufffd), first in line {lost}"] if lost else []
    if decoder.newlines == "\r":
        notes.append("lines end with a bare carriage return (old Macintosh form); read as lines")
    return TextLines([*lines, rest] if rest else lines, tuple(notes))


def _first_with(mark: str, lines: list[str], before: int) -> int:
    """Return the number of the first line with a character, counted from 1 after ``before`` lines, or 0."""
    return next((before + k for k, line in enumerate(lines, start=1) if mark in line), 0)


def _refuse_nul(path: Path, lines: list[str], before: int) -> None:
    line = _first_with("\0", lines, before)
    if line:
        raise InputError(
            f"{path}: line {line}: a NUL byte, which no text has; the file is damaged: export the table again"
        )


def _other_encoding(path: Path, encoding: Encoding) -> Encoding:
    """Return the encoding of a file that is not in the one its start promised, when there is no doubt."""
    data = b"".join(_pieces(path))
    western = western_encoding(data) if encoding.name == "utf-8" else None
    if western is None:
        raise encoding_error(path, data, encoding)
    return western


def _with_last(pieces: Iterator[bytes]) -> Iterator[tuple[bytes, bool]]:
    before = next(pieces, b"")
    for piece in pieces:
        yield before, False
        before = piece
    yield before, True


def _is_packed(path: Path) -> bool:
    return _first_bytes(path).startswith(b"\x1f\x8b")


def _start(path: Path) -> bytes:
    return next(_pieces(path), b"")[:4000]


def _pieces(path: Path, skipped: int = 0) -> Iterator[bytes]:
    """Yield the bytes of a file, unpacked, without the first ``skipped``."""
    packed, total = _is_packed(path), 0
    try:
        with gzip.open(path) if packed else path.open("rb") as file:
            file.read(skipped)
            while piece := file.read(_CHUNK):
                total += len(piece)
                if total > LARGEST_TEXT:
                    raise InputError(
                        f"{path}: more than {LARGEST_TEXT // 2**30} GB of text; cut the table into parts"
                    )
                yield piece
    except (OSError, EOFError, zlib.error) as error:
        if packed:
            raise InputError(f"{path}: the gzip file is damaged or cut short; fetch it again") from None
        why = getattr(error, "strerror", None) or error
        raise InputError(f"{path}: the file cannot be read ({why}); check its permissions") from None
