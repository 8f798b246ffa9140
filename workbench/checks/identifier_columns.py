"""Feature ids and annotation columns that hold identifiers of a known kind, held against the form of that kind."""

from __future__ import annotations

import pandas as pd

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.finding import Finding, Severity, finding_id
from workbench.intake import IdentifierColumn, identifier_columns

CHECK = "identifiers"


def check_identifier_columns(data: StudyData) -> list[Finding]:
    """Find identifiers (Ensembl, UniProt, HMDB, ...) that are not in the form of their kind, or not one to one.

    A warning where a lookup would fail: digits lost, another form. A note on version suffixes, forms of earlier
    releases, other case, several identifiers of a feature, and one that several features share: nothing is merged.
    Dates that a spreadsheet made of names are found by another check.
    """
    found = []
    for block in data.blocks.values():
        for column in identifier_columns(block.features, texts_of(block.annotations)):
            found += _of_column(block, column)
    return found


def texts_of(annotations: pd.DataFrame) -> pd.DataFrame:
    """Return the columns of text, empty where a feature lacks one."""
    texts = [name for name in annotations if annotations[name].dtype == object]
    return annotations[texts].fillna("").astype(str)


def _of_column(block: CheckedBlock, column: IdentifierColumn) -> list[Finding]:
    faults = [fault for fault in column.faults if fault.fault != "date"]
    if not (faults or column.several or column.shared):
        return []
    spoilt = any(fault.damage for fault in faults)
    severity: Severity = "warning" if spoilt else "note"
    rows = dict.fromkeys(
        [row for fault in faults for row in fault.positions]
        + list(column.several)
        + [row for shared in column.shared.values() for row in shared]
    )
    what = f"block '{block.name}': {column.sentence()}"
    todo = "mend them in the file that they come from: they cannot be looked up as they are"
    if not spoilt:
        todo = (
            "nothing, unless what you look them up in is strict about it; features that share one stay apart"
        )
    features = tuple(block.features[row] for row in rows)
    identity = finding_id(CHECK, block.name, column.column or "feature_ids")
    return [Finding(identity, CHECK, severity, block.name, what, (), features, todo)]
