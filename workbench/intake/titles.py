"""Lines above the header that are none: titles, empty lines, names over groups of columns."""

from __future__ import annotations

import csv
from collections import Counter
from collections.abc import Sequence

from .raw import split_line
from .tokens import is_comma_number, number_of, word_set

MOST_ABOVE = 10
_LOOKED_AT = 50
_LEAST_WIDTH = 3
# Names over an id column; a header that starts with one does not lack a field, whatever its length.
ID_WORDS = word_set(
    "id ids name names sample samples sample_id sampleid feature features feature_id gene genes gene_id "
    "geneid gene_name symbol protein proteins metabolite metabolites compound compounds lipid lipids "
    "taxon otu asv probe row.names"
)


def rows_above(rows: Sequence[Sequence[str]], width: int) -> int:
    """Return how many of the first rows stand above the header of a table ``width`` fields wide.

    None, when the first row has all its names (that over the ids may be empty). Else the header is the first
    of the next ten rows that has them, and is not made of numbers for the most part, if each row above it

    - is empty, or holds one filled field (a title, not a word such as ``sample`` or ``id``), or
    - holds two, the first of which ends with a colon (``Operator:``), or
    - is as wide as the table, with an empty first field and at most half of the others filled (names over
      groups of columns), or
    - is a text that happens to hold what parts the fields: narrower than the table by two fields or more, or
      wider, with blanks within or before its fields (``Table S2, raw areas``), and no word such as ``sample``
      or ``id`` alone in the first of them.

    A row that is none of these, and as wide as the table, is judged as the header that it should be; where
    nothing fits, the first row is.

    >>> rows_above([["Table S2", "", ""], ["id", "S1", "S2"], ["g1", "1", "2"]], 3)
    1
    >>> rows_above([["id", "", ""], ["g1", "1", "2"]], 3)
    0
    >>> rows_above([["Table S2", " raw areas"], ["id", "S1", "S2", "S3"], ["g1", "1", "2", "3"]], 4)
    1
    """
    if width < _LEAST_WIDTH:
        return 0
    for k, row in enumerate(rows[: MOST_ABOVE + 1]):
        if _names_all(row, width):
            return 0 if _mostly_numbers(row) else k
        if not _is_above(row, width):
            return k if len(row) == width and not _mostly_numbers(row) else 0
    return 0


def lines_above(lines: Sequence[str]) -> tuple[int, str]:
    """Return how many lines of a text stand above its header (see `rows_above`), and what parts the fields.

    Tabs part them where most lines hold tabs in equal number; else semicolons or commas, and only where the
    first line is no header for either of them. What less than half as many lines hold stands in a text by chance.

    >>> lines_above(["raw counts; release 64; do not edit,,", "id,S1,S2", "g1,1,2", "g2,3,4", "g3,5,6"])
    (1, ',')
    """
    looked_at = lines[:_LOOKED_AT]
    tabs = _split_all(looked_at, "\t")
    if tabs is not None and _width(tabs) > 1:
        return rows_above(tabs, _width(tabs)), "\t"
    found = {}
    split = {separator: _split_all(looked_at, separator) or [] for separator in (";", ",")}
    parted = {separator: sum(len(row) > 1 for row in rows) for separator, rows in split.items()}
    for separator, rows in split.items():
        if 2 * parted[separator] < max(parted.values()):
            continue
        width = _width(rows) if rows else 0
        if rows and _is_header(rows[0], width):
            return 0, separator
        if rows and width >= _LEAST_WIDTH:
            found[separator] = rows_above(rows, width)
    return next(((above, separator) for separator, above in found.items() if above), (0, ","))


def _is_header(row: Sequence[str], width: int) -> bool:
    """Whether a row names all columns; one field may lack, as R writes tables."""
    return len(row) > 1 and (_names_all(row, width) or (len(row) == width - 1 and all(row[1:])))


def _split_all(lines: Sequence[str], separator: str) -> list[list[str]] | None:
    try:
        return [split_line(line, separator) for line in lines]
    except csv.Error:
        return None


def _width(rows: Sequence[Sequence[str]]) -> int:
    """Return the number of fields that more than half of the rows with several fields have, or 0."""
    widths = Counter(len(row) for row in rows if len(row) > 1)
    width, times = max(widths.items(), key=lambda item: item[1], default=(0, 0))
    return width if 2 * times > widths.total() else 0


def _names_all(row: Sequence[str], width: int) -> bool:
    return len(row) == width and all(field.strip() for field in row[1:])


def _mostly_numbers(row: Sequence[str]) -> bool:
    numbers = sum(number_of(field.strip()) is not None or is_comma_number(field) for field in row[1:])
    return 2 * numbers > len(row) - 1


def _is_prose(row: Sequence[str]) -> bool:
    """Whether a row reads like a sentence that was cut at its commas."""
    first = row[0].strip()
    if not first or first.casefold() in ID_WORDS or _mostly_numbers(row):
        return False
    return " " in first or any(field.startswith(" ") and field.strip() for field in row[1:])


def _is_above(row: Sequence[str], width: int) -> bool:
    filled = [field.strip() for field in row if field.strip()]
    if len(filled) <= 1:
        return len(row) in (0, 1, width) and not ID_WORDS.intersection(map(str.casefold, filled))
    if len(filled) == 2 and filled[0].endswith(":"):
        return True
    if len(row) not in (width - 1, width) and _is_prose(row):
        return True
    over_groups = not row[0].strip() and 2 * len(filled) <= width - 1
    return over_groups and len(row) == width
