"""Reading TSV and CSV: the delimiter from the header, the number of fields checked on every line."""

from __future__ import annotations

import csv
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from workbench.errors import InputError

from .faults import Faults, counted, shown
from .files import read_lines
from .raw import RawTable, TextBody, split_line

SEPARATORS = {"\t": "tab", ";": "semicolon", ",": "comma"}
_LOOKED_AT = 50
_ID_WORDS = frozenset(
    "id ids name names sample samples sample_id sampleid feature features feature_id gene genes gene_id "
    "geneid gene_name "
    "symbol protein proteins metabolite metabolites compound compounds lipid taxon otu asv probe row.names".split()
)


@dataclass(frozen=True)
class _Layout:
    """Where the header is, what parts the fields, and how many there are."""

    header: list[str]
    header_line: int
    separator: str


def read_text_table(path: Path) -> RawTable:
    """Return a TSV or CSV file as a `RawTable` with untouched text cells.

    Raises
    ------
    InputError
        When lines differ in their number of fields, a quote is not closed, or the header stands alone.
    """
    text = read_lines(path)
    lines, notes = text.lines, list(text.notes)
    layout = _layout(path, lines, notes)
    lines, empty = _without_empty_end(lines, layout)
    if empty:
        notes.append(f"{path.name}: {counted(empty, 'line')} of separators alone at the end left out")
    body_lines = lines[layout.header_line :]
    if not body_lines:
        raise InputError(
            f"{path}: line {layout.header_line} is a header, and no row follows; export the table again"
        )
    ids, widths = _ids_and_widths(path, body_lines, layout)
    width = _checked_width(path, body_lines, widths, layout)
    lacks = width == len(layout.header) + 1
    if lacks:
        notes.append(
            f"{path.name}: the header has one field fewer than the rows (as R writes tables); its names were "
            "taken for the columns after the first"
        )
    return RawTable(
        path=path,
        form="tsv" if layout.separator == "\t" else "csv",
        corner="" if lacks else layout.header[0],
        columns=tuple(layout.header if lacks else layout.header[1:]),
        rows=tuple(ids),
        body=TextBody(body_lines, layout.separator, layout.header_line + 1, width),
        corner_lacks=lacks,
        notes=tuple(notes),
    )


def find_separator(lines: Sequence[str]) -> str:
    """Return the delimiter of a table: tab where the header has one, else the one that parts all lines alike.

    Of semicolon and comma the one is taken that gives every line of the first fifty the same number of fields
    (the header may have one fewer); then the one that the header has more of; a table of one column counts as
    tab.

    >>> find_separator(["a;b", "1,5;2,5"]), find_separator(["a,b", "1,2"]), find_separator(["a"])
    (';', ',', '\\t')
    """
    header = lines[0]
    candidates = [s for s in (";", ",") if s in header]
    if "\t" in header or not candidates:
        return "\t"
    even = [s for s in candidates if _parts_alike(lines[:_LOOKED_AT], s)]
    return max(even or candidates, key=lambda s: (header.count(s), s == ","))


def _parts_alike(lines: Sequence[str], separator: str) -> bool:
    try:
        widths = [len(split_line(line, separator)) for line in lines if line.strip()]
    except csv.Error:
        return False
    return len(set(widths[1:])) <= 1 and (not widths[1:] or widths[1] - widths[0] in (0, 1))


def _layout(path: Path, lines: list[str], notes: list[str]) -> _Layout:
    comments = next((i for i, line in enumerate(lines) if not line.startswith("#")), len(lines) - 1)
    separator = find_separator(lines[comments:])
    if comments and _same_width(lines[comments - 1], lines[comments], separator):
        comments -= 1
    if comments:
        notes.append(f"{path.name}: {counted(comments, 'line')} starting with '#' before the header left out")
    line = lines[comments]
    if not line.strip():
        raise InputError(
            f"{path}: line {comments + 1} is empty; the header must be the first line: take the empty lines "
            "out"
        )
    header = _fields(path, line, comments + 1, separator)
    return _Layout(header, comments + 1, separator)


def _same_width(line: str, other: str, separator: str) -> bool:
    return separator in line and line.count(separator) == other.count(separator)


def _fields(path: Path, line: str, number: int, separator: str) -> list[str]:
    try:
        return split_line(line, separator)
    except csv.Error:
        raise _quote_error(path, [(number, line)], separator) from None


def _quote_error(path: Path, wrong: Sequence[tuple[int, str]], separator: str) -> InputError:
    faults = Faults(path)
    for number, line in wrong:
        fields = line.split(separator)
        column = next((j for j, text in enumerate(fields) if text.startswith('"') and text.count('"') % 2), 0)
        faults.add(f"line {number}, column {column + 1}: {shown(fields[column])}")
    return faults.error(
        f"{counted(faults.total, 'line')} with a double quote that is opened and not closed, or closed in "
        "the middle of a cell",
        "close the quotes, double those inside a quoted cell, and take line breaks out of cells",
    )


def _without_empty_end(lines: list[str], layout: _Layout) -> tuple[list[str], int]:
    end = len(lines)
    while end > layout.header_line and not lines[end - 1].replace(layout.separator, "").strip():
        end -= 1
    return lines[:end], len(lines) - end


def _ids_and_widths(path: Path, lines: list[str], layout: _Layout) -> tuple[list[str], list[int]]:
    ids: list[str] = []
    widths: list[int] = []
    wrong: list[tuple[int, str]] = []
    for number, line in enumerate(lines, start=layout.header_line + 1):
        if '"' not in line:
            ids.append(line.partition(layout.separator)[0])
            widths.append(line.count(layout.separator) + 1)
            continue
        try:
            fields = split_line(line, layout.separator)
        except csv.Error:
            wrong.append((number, line))
            continue
        ids.append(fields[0])
        widths.append(len(fields))
    if wrong:
        raise _quote_error(path, wrong, layout.separator)
    return ids, widths


def _checked_width(path: Path, lines: list[str], widths: list[int], layout: _Layout) -> int:
    """Return the number of fields of every line, after the header's, or one more for a header in R's form."""
    n = len(layout.header)
    count = Counter(widths)
    if count[n] == len(widths):
        return n
    if (
        count[n + 1] > len(widths) / 2
        and not _trailing(lines, layout)
        and layout.header[0].lower() not in _ID_WORDS
    ):
        n += 1
    if count[n] == len(widths):
        return n
    raise _width_error(path, lines, widths, n, layout)


def _trailing(lines: list[str], layout: _Layout) -> bool:
    return all(line.endswith(layout.separator) for line in lines)


def _width_error(path: Path, lines: list[str], widths: list[int], n: int, layout: _Layout) -> InputError:
    faults = Faults(path)
    for i, width in enumerate(widths):
        if width != n and faults.full:
            faults.add("")
        elif width != n:
            faults.add(_width_fault(i + layout.header_line + 1, lines[i], n, layout))
    what = "name" if n == len(layout.header) else "field in the other rows"
    return faults.error(
        f"{counted(faults.total, 'line')} of {counted(len(lines), 'row')} without one field for each of the "
        f"{n} {what}s "
        f"(parted by {SEPARATORS[layout.separator]})",
        "give every line as many fields as the header, empty where a value is missing, and no separator at "
        "its end",
    )


def _width_fault(number: int, line: str, n: int, layout: _Layout) -> str:
    if not line.strip():
        return f"line {number} is empty"
    fields = split_line(line, layout.separator)
    if len(fields) < n:
        last = f"the last, in column {len(fields)}, is {shown(fields[-1])}"
    elif not fields[-1]:
        last = f"a separator stands at the end of the line: column {n + 1} has no name"
    else:
        last = f"column {n + 1} has no name and holds {shown(fields[n])}"
    return f"line {number} ({shown(fields[0])}): {counted(len(fields), 'field')}; {last}"
