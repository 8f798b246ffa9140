"""Names that a spreadsheet has damaged, and names of features that differ only in how they are written."""

from __future__ import annotations

import re
from collections import defaultdict
from collections.abc import Iterable, Sequence

import pandas as pd

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.finding import Finding, finding_id
from workbench.checks.words import number_of, some
from workbench.intake.dates import is_date, suspicious_numbers
from workbench.intake.faults import counted
from workbench.intake.tokens import MISSING

DAMAGED_CHECK = "damaged_identifiers"
TWICE_CHECK = "similar_identifiers"
MOST_DATES = 0.2
FEWEST_CELLS = 10

_ACCESSION = re.compile(r"((?:ENS[A-Z]*[EGTP]\d{11}|[NX][CGMPRT]_\d{6,9}|[A-Z]{1,4}\d{5,9}))\.\d{1,3}")
_MADE_UNIQUE = re.compile(r"(.*[A-Za-z].*)\.([1-9]\d?)")


def check_identifiers(data: StudyData) -> list[Finding]:
    """Find names turned into dates or numbers, and names that differ only in case, blanks or a version suffix.

    Looked at are feature ids, the columns of annotations, and spare tables. A column in which more than a
    fifth of the cells are dates is a column of dates, and left alone.
    """
    found = []
    for block in data.blocks.values():
        found += _damaged_ids(block) + _similar(block)
        for column in map(str, block.annotations.columns):
            found += _damaged_column(block.name, column, block.annotations[column])
    for file, table in data.spare_tables.items():
        found += _spare(file, table)
    return found


def _damaged_ids(block: CheckedBlock) -> list[Finding]:
    dates, odd = damaged_names(block.features)
    if not dates and not odd:
        return []
    what = f"feature ids of block '{block.name}' that a spreadsheet has changed: {_told(dates, odd)}"
    identity = finding_id(DAMAGED_CHECK, block.name)
    severity = "error" if dates else "warning"
    todo = (
        "export the table again from its source without a spreadsheet between, or put the names back (SEPT2, MARCH1, "
        f"2310009E13) and run `workbench add-block {block.name} FILE --replace`"
    )
    return [Finding(identity, DAMAGED_CHECK, severity, block.name, what, (), (*dates, *odd), todo)]  # type: ignore[arg-type]


def _told(dates: Sequence[str], odd: Sequence[str]) -> str:
    parts = [f"{counted(len(dates), 'date')} such as {some(dates)}"] if dates else []
    if odd:
        parts.append(f"{counted(len(odd), 'number')} such as {some(odd)}")
    return " and ".join(parts)


def damaged_names(names: Iterable[str]) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Return the names that are dates, and those that may be serial numbers of dates or rounded names.

    Nothing where more than a fifth are dates, or most are numbers: that is what the column then holds.

    >>> damaged_names([f"GENE{k}" for k in range(60)] + ["2-Sep", "44075"])
    (('2-Sep',), ('44075',))
    """
    held = [name.strip() for name in names if name.strip() not in MISSING]
    dates = tuple(name for name in held if is_date(name))
    if len(held) < FEWEST_CELLS or len(dates) > MOST_DATES * len(held):
        return (), ()
    return dates, suspicious_numbers(held)


def _damaged_column(block: str, column: str, cells: pd.Series) -> list[Finding]:
    dates, odd = damaged_names(cells.dropna().astype(str))
    if not dates and not odd:
        return []
    wrong = {*dates, *odd}
    features = tuple(str(name) for name, cell in cells.items() if str(cell).strip() in wrong)
    what = (
        f"column '{column}' of the annotations of block '{block}' holds names that a spreadsheet has changed: "
        f"{_told(dates, odd)}, for {number_of(features, 'feature')}"
    )
    todo = (
        "put the names back in the annotation file (SEPT2, MARCH1, not a date), as text; until then nothing that is "
        "looked up by this column finds these features"
    )
    identity = finding_id(DAMAGED_CHECK, block, column)
    return [Finding(identity, DAMAGED_CHECK, "warning", block, what, (), features, todo)]


def _spare(file: str, table: pd.DataFrame) -> list[Finding]:
    found = []
    columns = [("", table.index.to_series().astype(str))] if table.index.dtype == object else []
    columns += [(str(column), table[column].dropna().astype(str)) for column in table.columns]
    for column, cells in columns:
        dates, odd = damaged_names(cells)
        if dates or odd:
            where = f"column '{column}'" if column else "the first column"
            what = f"{where} of '{file}' holds names that a spreadsheet has changed: {_told(dates, odd)}"
            todo = "put the names back before the file is used (SEPT2, MARCH1, not a date), as text"
            identity = finding_id(DAMAGED_CHECK, "", file, column)
            found.append(Finding(identity, DAMAGED_CHECK, "warning", "", what, (), (*dates, *odd), todo))
    return found


def _similar(block: CheckedBlock) -> list[Finding]:
    families = similar_names(block.features)
    if not families:
        return []
    names = tuple(name for family in families for name in family)
    examples = "; ".join(" and ".join(f"'{name}'" for name in family[:3]) for family in families[:3])
    what = (
        f"{counted(len(families), 'name')} of block '{block.name}' stand{'s' if len(families) == 1 else ''} there more "
        f"than once but for case, blanks or a version: {examples}"
        f"{'' if len(families) <= 3 else f' and {len(families) - 3} more'}"
    )
    todo = "look whether these are one feature each; keep one, or give them names that tell them apart"
    identity = finding_id(TWICE_CHECK, block.name)
    return [Finding(identity, TWICE_CHECK, "warning", block.name, what, (), names, todo)]


def similar_names(names: Sequence[str]) -> list[tuple[str, ...]]:
    """Return families of names that are the same but for case, blanks, or the version of an accession.

    ``GENE.1`` belongs to ``GENE`` as well, where that stands there too: so tables write the second of two equal
    names.

    >>> similar_names(["TP53", "tp53 ", "ENSG00000141510.1", "ENSG00000141510.2", "MDM2", "MDM2.1", "A.1", "A.2"])
    [('TP53', 'tp53 '), ('ENSG00000141510.1', 'ENSG00000141510.2'), ('MDM2', 'MDM2.1')]
    """
    plain = {name: re.sub(r"\s+", " ", name.strip()).casefold() for name in names}
    known = set(plain.values())
    families: dict[str, list[str]] = defaultdict(list)
    for name, form in plain.items():
        accession = _ACCESSION.fullmatch(form.upper())
        second = _MADE_UNIQUE.fullmatch(form)
        if accession:
            form = accession.group(1).casefold()
        elif second and second.group(1) in known:
            form = second.group(1)
        families[form].append(name)
    return [tuple(family) for family in families.values() if len(family) > 1]
