"""Reading TSV and CSV: untouched text, and the number of fields checked on every line."""

from __future__ import annotations

import csv
from collections import Counter
from collections.abc import Sequence
from pathlib import Path

from workbench.errors import InputError

from .faults import Faults, counted, shown
from .files import read_lines
from .layout import SEPARATORS, Layout, find_layout, quote_error
from .raw import RawTable, TextBody, split_line
from .titles import ID_WORDS

_R_FORM = (
    "the header is one field short (as R writes tables); its names are those of the columns after the first"
)


def read_text_table(path: Path) -> RawTable:
    """Return a TSV or CSV file as a `RawTable` with untouched text cells.

    A header that is one field short of every row (R's form) is accepted and told, unless its first name is
    one for ids, or every row just ends with a separator. Lines of separators alone at the end are left out
    and told.

    Raises
    ------
    InputError
        When lines differ in their number of fields, a quote is not closed, or the header stands alone.
    """
    text = read_lines(path)
    layout = find_layout(path, text.lines)
    lines, empty = _without_empty_end(text.lines[layout.header_line :], layout.separator)
    if not lines:
        raise InputError(
            f"{path}: line {layout.header_line} is a header, and no row follows; export the table again"
        )
    ids, widths = _ids_and_widths(path, lines, layout)
    width = _checked_width(path, lines, widths, layout)
    lacks = width == len(layout.header) + 1
    notes = [*text.notes, *layout.notes]
    notes += (
        [f"{path.name}: {counted(empty, 'line')} of separators alone at the end left out"] if empty else []
    )
    notes += [f"{path.name}: {_R_FORM}"] if lacks else []
    return RawTable(
        path=path,
        form="tsv" if layout.separator == "\t" else "csv",
        corner="" if lacks else layout.header[0],
        columns=tuple(layout.header if lacks else layout.header[1:]),
        rows=tuple(ids),
        body=TextBody(lines, layout.separator, layout.header_line + 1, width, lacks),
        corner_lacks=lacks,
        notes=tuple(notes),
    )


def _without_empty_end(lines: Sequence[str], separator: str) -> tuple[Sequence[str], int]:
    end = len(lines)
    while end and not lines[end - 1].replace(separator, "").strip():
        end -= 1
    return lines[:end], len(lines) - end


def _ids_and_widths(path: Path, lines: Sequence[str], layout: Layout) -> tuple[list[str], list[int]]:
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
        raise quote_error(path, wrong, layout.separator)
    return ids, widths


def _checked_width(path: Path, lines: Sequence[str], widths: Sequence[int], layout: Layout) -> int:
    """Return the number of fields of every line: the header's, or one more for a header in R's form."""
    n = len(layout.header)
    count = Counter(widths)
    if count[n] < len(widths) and 2 * count[n + 1] > len(widths) and _may_lack(lines, layout):
        n += 1
    if count[n] == len(widths):
        return n
    raise _width_error(path, lines, widths, n, layout)


def _may_lack(lines: Sequence[str], layout: Layout) -> bool:
    trailing = all(line.endswith(layout.separator) for line in lines)
    return not trailing and layout.header[0].strip().casefold() not in ID_WORDS


def _width_error(
    path: Path, lines: Sequence[str], widths: Sequence[int], n: int, layout: Layout
) -> InputError:
    faults = Faults(path)
    for i, width in enumerate(widths):
        if width != n and faults.full:
            faults.total += 1
        elif width != n:
            faults.add(_width_fault(i + layout.header_line + 1, lines[i], n, layout.separator))
    fields = "the header's" if n == len(layout.header) else "the other rows'"
    return faults.error(
        f"{faults.total:,} of {counted(len(lines), 'row')} do not have {fields} {counted(n, 'field')} "
        f"(parted by {SEPARATORS[layout.separator]})",
        f"{_width_way_out(widths, layout)}give every line as many fields as the header, empty where a "
        "value is missing, and no separator at its end",
    )


def _width_way_out(widths: Sequence[int], layout: Layout) -> str:
    """Return the advice for rows with twice the header's values, which decimal commas make."""
    n = len(layout.header)
    if layout.separator == "," and n > 1 and 2 * sum(width == 2 * n - 1 for width in widths) > len(widths):
        return "numbers with decimal commas need another separator: write decimal points, or part fields by tabs; "
    return ""


def _width_fault(number: int, line: str, n: int, separator: str) -> str:
    if not line.strip():
        return f"line {number} is empty"
    fields = split_line(line, separator)
    if len(fields) < n:
        last = f"the last, in column {len(fields)}, is {shown(fields[-1])}"
    elif fields[-1]:
        last = f"column {n + 1} has no name and holds {shown(fields[n])}"
    else:
        last = f"a separator stands at the end of the line: column {n + 1} has no name"
    return f"line {number} ({shown(fields[0])}) has {counted(len(fields), 'field')}; {last}"
