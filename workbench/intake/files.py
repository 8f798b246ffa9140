"""Opening delivered files: what the first bytes say the format is, and bytes to checked text lines."""

from __future__ import annotations

import gzip
import zlib
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

from .faults import Faults, shown

LARGEST_TEXT = 8 * 2**30
_UTF16 = (b"\xff\xfe", b"\xfe\xff")
_UTF8_MARK = b"\xef\xbb\xbf"
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

    lines: list[str]
    notes: tuple[str, ...]


def read_lines(path: Path) -> TextLines:
    r"""Return the lines of a UTF-8 text file (plain or .gz); blank lines at the end are left out.

    Line ends may be ``\\n``, ``\\r\\n`` or ``\\r``; no other character ends a line. A byte-order mark is
    accepted and told.

    Raises
    ------
    InputError
        When the bytes are no UTF-8 (UTF-16, Windows-1252 ...; with line and character), hold NUL bytes, or
        the file holds no line.
    """
    data, notes = _plain_bytes(path)
    if data.startswith(_UTF8_MARK):
        data = data[len(_UTF8_MARK) :]
        notes.append(f"{path.name}: starts with a byte-order mark, which was left out")
    text = _decoded(path, data)
    if "\ufffd" in text:
        line = text.count("\n", 0, text.index("\ufffd")) + 1
        notes.append(
            f"{path.name}: letters were lost in an earlier conversion (\ufffd), first in line {line}"
        )
    if "\r" in text:
        if "\n" not in text:
            notes.append(
                f"{path.name}: lines end with a bare carriage return (old Macintosh form); read as lines"
            )
        text = text.replace("\r\n", "\n").replace("\r", "\n")
    lines = text.split("\n")
    while lines and not lines[-1].strip(" "):
        lines.pop()
    if not lines:
        raise InputError(f"{path}: the file holds no text; a table needs a header line and rows")
    return TextLines(lines, tuple(notes))


def _plain_bytes(path: Path) -> tuple[bytes, list[str]]:
    try:
        if path.stat().st_size > LARGEST_TEXT:
            raise _too_large(path)
        data = path.read_bytes()
    except OSError as error:
        raise InputError(
            f"{path}: the file cannot be read ({error.strerror}); check its permissions"
        ) from None
    if not data.startswith(b"\x1f\x8b"):
        return data, []
    try:
        with gzip.open(path) as file:
            data = file.read(LARGEST_TEXT + 1)
    except (OSError, EOFError, zlib.error):
        raise InputError(f"{path}: the gzip file is damaged or cut short; fetch it again") from None
    if len(data) > LARGEST_TEXT:
        raise _too_large(path)
    return data, [f"{path.name}: compressed with gzip; read as the text inside"]


def _too_large(path: Path) -> InputError:
    return InputError(f"{path}: more than {LARGEST_TEXT // 2**30} GB of text; cut the table into parts")


def _decoded(path: Path, data: bytes) -> str:
    if data.startswith(_UTF16) or b"\x00" in data[:4000]:
        _refuse_wide(path, data)
    if b"\x00" in data:
        line = data.count(b"\n", 0, data.index(b"\x00")) + 1
        raise InputError(
            f"{path}: line {line}: a NUL byte, which no text has; the file is damaged: export the table again"
        )
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError:
        raise _encoding_error(path, data) from None


def _refuse_wide(path: Path, data: bytes) -> None:
    half = data[:4000].count(b"\x00") * 3 > len(data[:4000])
    if data.startswith(_UTF16) or half:
        raise InputError(
            f"{path}: line 1: the text is UTF-16 ('Unicode text' of a spreadsheet), not UTF-8; save the "
            "table as 'CSV UTF-8' or .xlsx"
        )


def _encoding_error(path: Path, data: bytes) -> InputError:
    faults = Faults(path)
    for number, line in enumerate(data.replace(b"\r\n", b"\n").replace(b"\r", b"\n").split(b"\n"), start=1):
        try:
            line.decode("utf-8")
        except UnicodeDecodeError as error:
            word = line[max(0, error.start - 12) : error.start + 8].decode("cp1252", errors="replace")
            faults.add(
                f"line {number}, character {error.start + 1}: byte 0x{line[error.start]:02X}; near "
                f"{shown(word)}"
            )
    lines = f"{faults.total} line{'s' if faults.total > 1 else ''}"
    return faults.error(
        f"{lines} not in UTF-8 (probably Windows-1252 or Latin-1, the words are shown as read so)",
        "save the table as 'CSV UTF-8', or as .xlsx",
    )
