"""From columns of the sample sheet to numbers: nuisance columns as a matrix, groups as codes."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from workbench.errors import InputError

from .faults import counted, listed, shown
from .kinds import column_kind, column_numbers, present

CELL_MARK = " / "


@dataclass(frozen=True)
class Design:
    """Nuisance columns of a study, ready for the engine (which adds the intercept).

    Attributes
    ----------
    matrix
        ndarray (samples, columns), float64, without missing values.
    names
        Name of each column of ``matrix``: ``age``, or ``batch=b2`` for the indicator of a level.
    constant
        Sheet columns that have one value in these samples, and therefore no column here.
    """

    matrix: np.ndarray
    names: tuple[str, ...]
    constant: tuple[str, ...] = ()


@dataclass(frozen=True)
class Groups:
    """The group of each sample.

    Attributes
    ----------
    codes
        ndarray (samples,), integers: position in ``levels``.
    levels
        Names of the groups that occur, in the stated order; the first is the reference. With several factors
        a group is a cell, named ``drought / late``.
    factors
        Sheet columns that make the groups.
    """

    codes: np.ndarray
    levels: tuple[str, ...]
    factors: tuple[str, ...]


def missing_samples(frame: pd.DataFrame, columns: Sequence[str]) -> dict[str, tuple[str, ...]]:
    """Return, for each column that lacks values, the ids of the samples that lack one."""
    _check_columns(frame, columns)
    lacking = {}
    for column in columns:
        held = set(present(frame[column]).index)
        names = tuple(str(sample) for sample in frame.index if sample not in held)
        if names:
            lacking[column] = names
    return lacking


def design_columns(
    frame: pd.DataFrame, columns: Sequence[str], kinds: Mapping[str, str] | None = None
) -> Design:
    """Return nuisance columns as a matrix: numbers as they are, classes as indicators of all but one level.

    Levels are sorted (numbers by value). A column with one value in these samples adds nothing to the
    intercept, and is listed in ``constant``.

    Parameters
    ----------
    frame
        Sample sheet, indexed by sample.
    columns
        Its columns to use, in this order.
    kinds
        ``classes`` or ``number`` for columns that could be either; it overrules what the cells look like.

    Raises
    ------
    InputError
        When a column is not there, lacks values (the samples are named), is said to be a number and is not,
        or could be either and nobody has said which. With two different numbers both readings are the same,
        and nothing is asked.

    Examples
    --------
    >>> cells = {"batch": ["b1", "b2", "b2"], "age": ["30", "41", "52"]}
    >>> frame = pd.DataFrame(cells, index=["S1", "S2", "S3"])
    >>> design = design_columns(frame, ["batch", "age"])
    >>> design.names
    ('batch=b2', 'age')
    >>> design.matrix.tolist()
    [[0.0, 30.0], [1.0, 41.0], [1.0, 52.0]]
    """
    _refuse_missing(frame, columns)
    matrix: list[np.ndarray] = []
    names: list[str] = []
    constant: list[str] = []
    for column in columns:
        kind = _kind(frame[column], column, (kinds or {}).get(column))
        added = _number(frame[column], column) if kind == "number" else _indicators(frame[column], column)
        matrix += added.values()
        names += added
        constant += [] if added else [column]
    values = np.column_stack(matrix) if matrix else np.empty((len(frame), 0))
    return Design(values, tuple(names), tuple(constant))


def group_codes(
    frame: pd.DataFrame, factors: str | Sequence[str], order: Mapping[str, Sequence[str]] | None = None
) -> Groups:
    """Return the group of each sample, from one factor or from the cells of several.

    Levels follow ``order`` where it names their factor; else they are sorted, numbers by value. Cells are in
    the order of the factors' levels, the last factor running fastest; only groups that occur are kept.

    Raises
    ------
    InputError
        When a factor is not a column, lacks values (the samples are named), or has a level that ``order``
        does not name.

    Examples
    --------
    >>> cells = {"water": ["dry", "wet", "dry"], "day": ["10", "2", "2"]}
    >>> frame = pd.DataFrame(cells, index=["S1", "S2", "S3"])
    >>> group_codes(frame, "water", {"water": ["wet", "dry"]}).codes.tolist()
    [1, 0, 1]
    >>> group_codes(frame, ["water", "day"]).levels
    ('dry / 2', 'dry / 10', 'wet / 2')
    """
    names = (factors,) if isinstance(factors, str) else tuple(factors)
    if not names:
        raise InputError("no factor was named; name at least one column of the sample sheet as the group")
    _refuse_missing(frame, names)
    codes = np.zeros(len(frame), dtype=np.intp)
    labels = [""]
    for name in names:
        levels = _ordered_levels(frame[name], name, (order or {}).get(name))
        code = {level: k for k, level in enumerate(levels)}
        codes = codes * len(levels) + present(frame[name]).map(code).to_numpy(dtype=np.intp)
        labels = [f"{label}{CELL_MARK if label else ''}{level}" for label in labels for level in levels]
    used, codes = np.unique(codes, return_inverse=True)
    return Groups(codes.astype(np.intp), tuple(labels[k] for k in used), names)


def sorted_levels(series: pd.Series) -> tuple[str, ...]:
    """Return the levels of a column: by value when all are numbers, else as text."""
    levels = set(present(series))
    numbers = column_numbers(series)
    if numbers is None:
        return tuple(sorted(levels))
    return tuple(sorted(levels, key=lambda level: (float(level), level)))


def _check_columns(frame: pd.DataFrame, columns: Sequence[str]) -> None:
    unknown = [column for column in columns if column not in frame.columns]
    if unknown:
        raise InputError(
            f"the sample sheet has no column {listed(unknown)}; its columns are "
            f"{listed(list(frame.columns))}: name one of them"
        )


def _refuse_missing(frame: pd.DataFrame, columns: Sequence[str]) -> None:
    lacking = missing_samples(frame, columns)
    if lacking:
        parts = [
            f"{shown(column)} for {counted(len(names), 'sample')}: {listed(names)}"
            for column, names in lacking.items()
        ]
        raise InputError(
            f"the sample sheet has no value in column {'; in column '.join(parts)}; fill the cells, "
            "exclude the samples, or do without the column"
        )


def _kind(series: pd.Series, column: str, said: str | None) -> str:
    if said is not None:
        if said not in ("classes", "number"):
            raise InputError(f"column {shown(column)}: its kind is '{said}'; allowed: 'classes', 'number'")
        return said
    kind = column_kind(series)
    if kind != "unclear":
        return kind
    levels = sorted_levels(series)
    if len(levels) > 2:
        raise InputError(
            f"column {shown(column)} of the sample sheet holds the whole numbers {listed(levels)}, which "
            "may be classes or a number; "
            f'say which in project.toml: [samples] kinds = {{ {column} = "classes" }} or "number"'
        )
    return "number"


def _number(series: pd.Series, column: str) -> dict[str, np.ndarray]:
    numbers = column_numbers(series)
    if numbers is None:
        text = sorted({cell for cell in present(series) if column_numbers(pd.Series([cell])) is None})
        raise InputError(
            f"column {shown(column)} of the sample sheet is said to be a number, but holds {listed(text)}; "
            "mend the cells, or "
            f'say kinds = {{ {column} = "classes" }}'
        )
    values = numbers.to_numpy(dtype=np.float64)
    return {} if len(set(values)) < 2 else {column: values}


def _indicators(series: pd.Series, column: str) -> dict[str, np.ndarray]:
    levels = sorted_levels(series)
    cells = present(series)
    if 2 < len(levels) == len(cells):
        raise InputError(
            f"column {shown(column)} of the sample sheet has a level of its own for each of {len(levels)} "
            "samples, so nothing would be left to analyse; take it out of adjust, or mend cells that "
            "should be numbers"
        )
    return {f"{column}={level}": (cells == level).to_numpy(dtype=np.float64) for level in levels[1:]}


def _ordered_levels(series: pd.Series, factor: str, order: Sequence[str] | None) -> tuple[str, ...]:
    levels = sorted_levels(series)
    if order is None:
        return levels
    unknown = [level for level in levels if level not in order]
    if unknown:
        raise InputError(
            f"column {shown(factor)} of the sample sheet has the level{'s' if len(unknown) > 1 else ''} "
            f"{listed(unknown)}, which order does not name; order has {listed(order)}: add the level, or "
            "mend the cells"
        )
    return tuple(level for level in order if level in levels)
