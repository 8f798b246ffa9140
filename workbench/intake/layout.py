"""Where the header of a text table is, and what parts its fields."""

from __future__ import annotations

import csv
import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

from .faults import Faults, counted, listed, shown
from .raw import split_line
from .titles import lines_above

SEPARATORS = {"\t": "tabs", ";": "semicolons", ",": "commas"}
_LOOKED_AT = 50
_DECLARED = re.compile(r"\"?sep=(.)\"?", re.IGNORECASE)


@dataclass(frozen=True)
class Layout:
    """Where the header is, and what parts the fields.

    Attributes
    ----------
    header
        Its fields.
    header_line
        Its line number, counted from 1; rows follow it.
    separator
        Tab, semicolon or comma.
    notes
        Lines that were passed over.
    """

    header: list[str]
    header_line: int
    separator: str
    notes: tuple[str, ...]


def find_layout(path: Path, lines: Sequence[str]) -> Layout:
    """Return the layout of a text table.

    Passed over and told: a first line ``sep=;`` as some spreadsheets write it, lines that start with ``#``
    before the header, and titles (see `rows_above`). The last of the lines with ``#`` is itself the header
    when it has as many fields as the line after it.

    Raises
    ------
    InputError
        When the line of the header is empty, or a quote in it is not closed.
    """
    declared = _DECLARED.fullmatch(lines[0]) if len(lines) > 1 else None
    first = 1 if declared else 0
    start = next((i for i in range(first, len(lines)) if not lines[i].startswith("#")), first)
    above, parting = lines_above(lines[start:])
    start += above
    separator = declared.group(1) if declared else parting if above else find_separator(lines[start:])
    if separator not in SEPARATORS:
        raise InputError(
            f"{path}: line 1 says that {shown(separator)} parts the fields; allowed: tab, semicolon, comma"
        )
    if start > first and not above and _same_width(lines[start - 1], lines[start], separator):
        start -= 1
    if not lines[start].strip():
        raise InputError(
            f"{path}: line {start + 1} is empty where the header should be; take empty lines out"
        )
    notes = (_above_note(path, lines[:start], separator),) if start else ()
    return Layout(_header(path, lines[start], start + 1, separator), start + 1, separator, notes)


def _above_note(path: Path, lines: Sequence[str], separator: str) -> str:
    texts = [text for line in lines if (text := line.strip(f" {separator}"))]
    said = f": {listed(texts, 3)}" if texts else ""
    return f"{path.name}: {counted(len(lines), 'line')} before the header left out{said}"


def find_separator(lines: Sequence[str]) -> str:
    r"""Return what parts the fields: a tab where the header has one, else what parts all lines alike.

    Of semicolon and comma the one is taken that gives every line of the first fifty the same number of fields
    (the header may have one fewer); then the one that the header has more of. A table of one column counts as
    parted by tabs.

    >>> find_separator(["a;b", "1,5;2,5"]), find_separator(["a,b", "1,2"]), find_separator(["a"])
    (';', ',', '\t')
    """
    header = lines[0]
    candidates = [mark for mark in (";", ",") if mark in header]
    if "\t" in header or not candidates:
        return "\t"
    even = [mark for mark in candidates if _parts_alike(lines[:_LOOKED_AT], mark)]
    return max(even or candidates, key=lambda mark: (header.count(mark), mark == ","))


def quote_error(path: Path, wrong: Sequence[tuple[int, str]], separator: str) -> InputError:
    """Return the error for lines (number and text) whose double quotes do not pair."""
    faults = Faults(path)
    for number, line in wrong:
        fields = line.split(separator)
        odd = (j for j, text in enumerate(fields) if text.startswith('"') and text.count('"') % 2)
        column = next(odd, next((j for j, text in enumerate(fields) if text.startswith('"')), 0))
        faults.add(f"line {number}, column {column + 1}: {shown(fields[column])}")
    return faults.error(
        f"{counted(faults.total, 'line')} with a double quote that is opened and not closed, or closed "
        "within a cell",
        "close the quotes, double those inside a quoted cell, and take line breaks out of cells",
    )


def _header(path: Path, line: str, number: int, separator: str) -> list[str]:
    try:
        return split_line(line, separator)
    except csv.Error:
        raise quote_error(path, [(number, line)], separator) from None


def _parts_alike(lines: Sequence[str], separator: str) -> bool:
    try:
        widths = [len(split_line(line, separator)) for line in lines if line.strip()]
    except csv.Error:
        return False
    return len(set(widths[1:])) <= 1 and (not widths[1:] or widths[1] - widths[0] in (0, 1))


def _same_width(line: str, other: str, separator: str) -> bool:
    return separator in line and line.count(separator) == other.count(separator)
