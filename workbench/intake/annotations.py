"""Feature annotations: a table of a feature id and identifier columns, kept as text."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import pandas as pd

from workbench.errors import InputError

from .faults import counted, listed, shown
from .ids import check_no_dates, check_present, check_unique, refuse_broken
from .raw import HEADER, RawTable, cell_text
from .readers import read_delivered

if TYPE_CHECKING:
    from .table import DeliveredTable

OWN_COLUMNS = ("kind", "levels", "under_limit")
"""Columns of ``var`` that a block makes itself."""

_THREE = 3


def read_annotations(path: str | Path, features: Sequence[str]) -> pd.DataFrame:
    """Return the annotations of the given features, in their order: text, empty where there is none.

    The first column of the file (TSV, CSV or XLSX) holds the feature ids. Rows of other features are left
    out.

    Raises
    ------
    InputError
        When no feature is in the file, a feature of the table has several rows, or a column has no name or
        that of another.
    """
    raw = _read(Path(path))
    wanted = set(features)
    found = [i for i, name in enumerate(raw.rows) if name in wanted]
    if not found:
        raise InputError(
            f"{path}: no feature of the table is in the first column of the annotations: the table has "
            f"{listed(list(features), _THREE)}, the annotations "
            f"{listed(raw.rows, _THREE)}{_other_column(raw, wanted)}"
        )
    check_unique(raw.path, [raw.rows[i] for i in found], "feature", lambda k: raw.place(found[k], -1))
    rows = {raw.rows[i]: [cell_text(cell).strip() for cell in raw.body.row(i)] for i in found}
    empty = [""] * len(raw.columns)
    return pd.DataFrame(
        [rows.get(name, empty) for name in features],
        index=pd.Index(list(features), dtype="object"),
        columns=pd.Index(list(raw.columns), dtype="object"),
        dtype=object,
    )


def add_delivered(var: pd.DataFrame, table: DeliveredTable) -> list[str]:
    """Add to the annotations in ``var`` what stood in the delivered table itself; return what is to be told.

    Where both have a column of one name, that of the file of annotations stays. A column with a name that
    blocks use themselves gets a ``_`` behind it. ``under_limit`` counts cells such as ``<LOD``, where there are
    any.
    """
    name, lines = table.path.name, []
    for column, cells in table.annotations.items():
        own = f"{column}_" if column in OWN_COLUMNS else str(column)
        if own in var.columns:
            lines.append(
                f"{name}: column {shown(column)} is left out, since the file of annotations has one too"
            )
        else:
            var[own] = cells.to_numpy()
    if table.under_limit:
        var["under_limit"] = [table.under_limit.get(feature, 0) for feature in var.index]
    return lines


def annotated_features(path: str | Path) -> tuple[str, ...]:
    """Return the feature ids of an annotation table, in file order."""
    return _read(Path(path)).rows


def _read(path: Path) -> RawTable:
    raw = read_delivered(path)
    if raw.form not in ("tsv", "csv", "xlsx"):
        raise InputError(
            f"{path}: annotations are TSV, CSV or XLSX, not {raw.form}; save them as one of these"
        )
    if not raw.columns:
        raise InputError(
            f"{path}: the annotations have one column only; beside the feature ids there must be another"
        )
    refuse_broken(raw, "feature")
    check_present(path, raw.columns, "column", lambda j: raw.place(HEADER, j))
    check_unique(path, raw.columns, "column", lambda j: raw.place(HEADER, j))
    check_no_dates(path, raw.rows, lambda i: raw.place(i, -1))
    return raw


def _other_column(raw: RawTable, wanted: set[str]) -> str:
    rows = [raw.body.row(i) for i in range(len(raw.rows))]
    hits = {name: sum(cell_text(row[j]) in wanted for row in rows) for j, name in enumerate(raw.columns)}
    best = max(hits, key=lambda name: hits[name])
    if not hits[best]:
        return "; use the same ids in both"
    return f"; column '{best}' has {counted(hits[best], 'of them', 'of them')}: make it the first one"
