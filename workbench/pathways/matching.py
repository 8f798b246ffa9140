"""Which column of identifiers a set table speaks, and which features are in which sets."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy import sparse

from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.pathways.sets import SetTable

NOT_IDENTIFIERS = frozenset(
    (
        *(
            "block",
            "layer",
            "degree",
            "community",
            "community_stability",
            "cluster",
            "kind",
            "levels",
            "origin",
        ),
        *("mean", "missing_share", "imputed_share", "model_r", "component"),
    )
)
"""Columns of the features table that are no names of a feature; ``pair1_own`` and the like are none either."""

_VARIATE = re.compile(r"(pair\d+_(own|other)|group_.*)")
_SEPARATOR = re.compile(r"\s*(?:;|\||///)\s*")
_SHOWN = 3
_READINGS: tuple[tuple[str, Callable[[str], str]], ...] = (
    ("in small letters", str.casefold),
    ("without their version (the point and number at the end)", lambda text: re.sub(r"\.\d+$", "", text)),
    ("without what stands before the colon", lambda text: text.rpartition(":")[2]),
)


def alternatives(cell: object) -> frozenset[str]:
    """Return the identifiers of a cell: the whole, and its parts between ``;``, ``|`` or ``///``.

    Examples
    --------
    >>> sorted(alternatives("C00031; C00221")), sorted(alternatives(None)), sorted(alternatives(7157.0))
    (['C00031', 'C00031; C00221', 'C00221'], [], ['7157'])
    """
    if cell is None or cell is pd.NA or (isinstance(cell, float) and np.isnan(cell)):
        return frozenset()
    text = str(int(cell)) if isinstance(cell, float) and cell.is_integer() else str(cell).strip()
    return frozenset(part for part in (text, *_SEPARATOR.split(text)) if part)


@dataclass(frozen=True)
class ColumnChoice:
    """The column of a block whose identifiers a table uses.

    Attributes
    ----------
    block, column : str
        ``column`` is empty where no column has any.
    features : int
        Features of the block.
    matched : int
        Those with an identifier that the table uses.
    """

    block: str
    column: str
    features: int
    matched: int

    def sentence(self, what: str) -> str:
        """Return the choice in words."""
        if not self.column:
            return f"{self.block}: none of its {self.features} features has an identifier of {what}"
        return f"{self.block}: {self.matched} of {self.features} features are in {what}, by column '{self.column}'"


@dataclass(frozen=True, eq=False)
class SetMembers:
    """Which features are in which sets.

    Attributes
    ----------
    table : SetTable
    choices : tuple of ColumnChoice
        One for each block.
    matrix : sparse array of bool, shape (features, sets)
        In the order of the features table and of the set table.
    """

    table: SetTable
    choices: tuple[ColumnChoice, ...]
    matrix: sparse.csr_array

    def sentences(self) -> tuple[str, ...]:
        """Return what was matched, in words."""
        return (*(one.sentence(self.table.path) for one in self.choices), *self.table.notes)


def identifier_columns(features: pd.DataFrame) -> list[str]:
    """Return the columns of a features table that name a feature, its own name first."""
    others = [
        str(column)
        for column in features.columns
        if column not in NOT_IDENTIFIERS and column != "feature" and not _VARIATE.fullmatch(str(column))
    ]
    return ["feature", *others]


def match_column(features: pd.DataFrame, block: str, wanted: Iterable[str]) -> ColumnChoice:
    """Return the column of a block with most features that have one of the wanted identifiers.

    The first one of equals: the feature's own name, then in the order of the table.
    """
    rows = features[features["block"] == block]
    identifiers = frozenset(wanted)
    best = ColumnChoice(block, "", len(rows), 0)
    for column in identifier_columns(features):
        matched = sum(not identifiers.isdisjoint(alternatives(cell)) for cell in rows[column])
        if matched > best.matched:
            best = ColumnChoice(block, column, len(rows), matched)
    return best


def match_sets(features: pd.DataFrame, table: SetTable) -> SetMembers:
    """Return which features are in which sets, each block by the column that has most identifiers of the table.

    A cell with several identifiers counts as alternatives: its feature is in a set that holds any of them, once.

    Parameters
    ----------
    features : pandas.DataFrame
        ``feature block`` and columns of identifiers.

    Raises
    ------
    InputError
        No feature of any block is in a set; says which identifiers the table uses and which the blocks have.
    """
    blocks = list(dict.fromkeys(features["block"]))
    choices = tuple(match_column(features, block, table.members) for block in blocks)
    if not any(choice.matched for choice in choices):
        raise InputError(_nothing_overlaps(features, table))
    column = {choice.block: choice.column for choice in choices}
    by_identifier: dict[str, list[int]] = {}
    for place, one in enumerate(table.sets):
        for member in one.members:
            by_identifier.setdefault(member, []).append(place)
    rows, columns = [], []
    for row, (block, record) in enumerate(zip(features["block"], features.to_dict("records"), strict=True)):
        names = alternatives(record[column[block]]) if column[block] else ()
        held = sorted({place for name in names for place in by_identifier.get(name, ())})
        rows += [row] * len(held)
        columns += held
    filled = (np.ones(len(rows), dtype=bool), (rows, columns))
    return SetMembers(table, choices, sparse.csr_array(filled, shape=(len(features), len(table.sets))))


def _nothing_overlaps(features: pd.DataFrame, table: SetTable) -> str:
    """Say which identifiers the sets use, which the blocks have, and what to do."""
    shown = []
    for block in dict.fromkeys(features["block"]):
        rows = features[features["block"] == block]
        held = {column: _examples(rows[column]) for column in identifier_columns(features)}
        listed = "; ".join(f"{column} ({', '.join(cells)})" for column, cells in held.items() if cells)
        shown.append(f"{block}: {listed}")
    wanted = ", ".join(_examples(sorted(table.members)))
    return (
        f"{table.path}: none of its {len(table.members)} identifiers ({wanted}) is in any column of the features. "
        f"{'. '.join(shown)}. {_hint(features, table)}"
    )


def _examples(cells: Iterable[object]) -> list[str]:
    """Return the first identifiers of a column, in quotes."""
    found: dict[str, None] = {}
    for cell in cells:
        if alternatives(cell):
            found[repr(str(cell)[:30])] = None
        if len(found) == _SHOWN:
            break
    return list(found)


def _hint(features: pd.DataFrame, table: SetTable) -> str:
    """Return what to do: a way of reading that would match, or where identifiers come from."""
    for words, read in _READINGS:
        wanted = {read(member) for member in table.members}
        for column in identifier_columns(features):
            cells: Sequence[object] = features[column].tolist()
            matched = sum(any(read(name) in wanted for name in alternatives(cell)) for cell in cells)
            if matched:
                return (
                    f"Read {words}, {counted(matched, 'feature')} of column '{column}' would match: write the table's "
                    "identifiers as the features have them"
                )
    return (
        "Use a table of these identifiers, or bring the ones that the table uses as a column: "
        "`workbench add-block ... --annotations FILE --replace`"
    )
