"""What a column of the sample sheet holds: classes, a number, or something that only its owner can tell."""

from __future__ import annotations

from typing import Literal

import numpy as np
import pandas as pd

from .tokens import is_padded, missing_among, number_of

ColumnKind = Literal["classes", "number", "unclear"]

FEW_VALUES = 10
SAMPLES_EACH = 3


def present(series: pd.Series) -> pd.Series:
    """Return the cells of a column that hold something, as text; missing tokens are left out."""
    text = series.dropna().astype(str).str.strip()
    return text[~text.isin(_missing(text))]


def _missing(text: pd.Series) -> frozenset[str]:
    different = set(text)
    tokens = missing_among(different)
    numbers = all(number_of(t) is not None for t in different - tokens)
    return tokens if numbers else tokens - {"-", "."}


def column_numbers(series: pd.Series) -> pd.Series | None:
    """Return a column as float64 with NaN where it is missing, or None when a cell is no finite number.

    Texts with zeros at the start (``007``) are codes, not numbers.
    """
    text = present(series)
    if any(map(is_padded, set(text))):
        return None
    numbers = {cell: number_of(cell) for cell in set(text)}
    if any(number is None or not np.isfinite(number) for number in numbers.values()):
        return None
    return text.map(numbers).reindex(series.index).astype(np.float64)


def column_kind(series: pd.Series) -> ColumnKind:
    """Return whether a column holds ``classes``, a ``number``, or is ``unclear``.

    Any text makes classes. Numbers are unclear when all are whole, at most ten are different, and each occurs
    three times or more on average: ``1, 2, 3`` may be batches or doses.

    >>> column_kind(pd.Series(["a", "b", "1"])), column_kind(pd.Series(["1.5", "2", "NA"]))
    ('classes', 'number')
    >>> column_kind(pd.Series(["1", "2"] * 6))
    'unclear'
    """
    numbers = column_numbers(series)
    if numbers is None:
        return "classes"
    held = numbers.dropna()
    if held.empty:
        return "classes"
    different = held.nunique()
    whole = bool((held == held.round()).all())
    return (
        "unclear" if whole and different <= FEW_VALUES and len(held) >= SAMPLES_EACH * different else "number"
    )
