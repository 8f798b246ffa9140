"""Which encoding the bytes of a text are in, taken only where they leave no doubt."""

from __future__ import annotations

import codecs
import re
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

from .faults import Faults, counted, listed, shown

_UTF8_MARK = b"\xef\xbb\xbf"
_UTF16_MARKS = ((b"\xff\xfe", "utf-16-le"), (b"\xfe\xff", "utf-16-be"))
_UTF8_LETTER = re.compile(rb"[\xc2-\xdf][\x80-\xbf]|[\xe0-\xef][\x80-\xbf]{2}|[\xf0-\xf4][\x80-\xbf]{3}")
_HIGH_RUN = re.compile(rb"[\x80-\xff]{3}")
_WORD = re.compile(r"[\w.+-]*[^\x00-\x7f][\w.+-]*")
# Letters and signs that tables of western laboratories hold; others of Windows-1252 stand as well for letters
# of other code pages (0x9A is a Windows-1250 letter and a Macintosh one), so they leave a doubt.
_WESTERN = frozenset(
    "ÀÁÂÃÄÅÆÇÈÉÊËÌÍÎÏÑÒÓÔÕÖØÙÚÛÜßàáâãäåæçèéêëìíîïñòóôõöøùúûüÿ"
    "µ°±²³·×®™€«»\u00a0\u00ad\u2018\u2019\u201c\u201d\u2013\u2014\u2026\u2022"
)


@dataclass(frozen=True)
class Encoding:
    """An encoding, the bytes of its mark at the start, and what is to be told of it."""

    name: str
    skipped: int = 0
    notes: tuple[str, ...] = ()


def first_encoding(start: bytes) -> Encoding:
    """Return the encoding that the first bytes of a text show: a mark, or NUL bytes; else UTF-8.

    Text without a mark counts as UTF-16 when its NUL bytes all stand at odd places (or all at even ones) and
    make up more than half of them, as the upper halves of ASCII letters do.

    >>> first_encoding("id,S1".encode("utf-16-be")).name, first_encoding(b"id,S1").name
    ('utf-16-be', 'utf-8')
    """
    if start.startswith(_UTF8_MARK):
        return Encoding("utf-8", len(_UTF8_MARK), ("starts with a byte-order mark, which was left out",))
    for mark, name in _UTF16_MARKS:
        if start.startswith(mark):
            return Encoding(
                name, len(mark), ("the text is UTF-16, as its byte-order mark says; read as such",)
            )
    nul = [start[offset::2].count(0) for offset in (0, 1)]
    for offset, name in ((1, "utf-16-le"), (0, "utf-16-be")):
        if 4 * nul[offset] > len(start) and not nul[1 - offset]:
            return Encoding(name, 0, ("the text is UTF-16 without a byte-order mark; read as such",))
    return Encoding("utf-8")


def decoder_for(encoding: Encoding) -> codecs.IncrementalDecoder:
    """Return a strict decoder for pieces of a text."""
    return codecs.getincrementaldecoder(encoding.name)("strict")


def western_encoding(data: bytes) -> Encoding | None:
    """Return Windows-1252 for bytes that are certainly in it, else None.

    Certain: all bytes beyond ASCII stand for letters and signs of western languages and of units, never three
    or more in a row (as other scripts write), and none of them make up a letter of UTF-8 (as in a file put
    together from two).

    >>> western_encoding("µg/l, Größe".encode("cp1252")).name
    'cp1252'
    >>> western_encoding("мкг".encode("cp1251")) is None
    True
    """
    if _HIGH_RUN.search(data) or _UTF8_LETTER.search(data):
        return None
    try:
        text = data.decode("cp1252")
    except UnicodeDecodeError:
        return None
    if not {character for character in set(text) if not character.isascii()} <= _WESTERN:
        return None
    lines = sum(not line.isascii() for line in text.splitlines())
    words = list(dict.fromkeys(_WORD.findall(text)))
    what = f"{counted(lines, 'line holds', 'lines hold')} letters of it: {listed(words, 3)}"
    return Encoding("cp1252", 0, (f"the text is Windows-1252, not UTF-8, and was read as such; {what}",))


def encoding_error(path: Path, data: bytes, encoding: Encoding) -> InputError:
    """Return the error for bytes that are in no encoding with certainty, with line and character."""
    if encoding.name != "utf-8":
        return InputError(
            f"{path}: line 1: the text starts as UTF-16 ('Unicode text' of a spreadsheet), but is cut short or "
            "damaged further on; save the table as 'CSV UTF-8' or .xlsx"
        )
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
    return faults.error(
        f"{counted(faults.total, 'line')} not in UTF-8, and not in Windows-1252 beyond doubt (the words are "
        "shown as read so)",
        "save the table as 'CSV UTF-8', or as .xlsx",
    )
