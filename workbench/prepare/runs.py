"""Assay runs: several runs of one sample, pools and blanks, in the order in which they went through the instrument."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from typing import Any, Self

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.errors import InputError
from workbench.prepare.words import some

Matrix = NDArray[np.float64]
Rows = NDArray[np.intp]

ROLES = ("sample", "pool", "blank")


@dataclass(frozen=True, eq=False, kw_only=True)
class Runs:
    """What is known of each run.

    Attributes
    ----------
    runs : tuple of str
        Names of the runs, each once.
    sample : tuple of str
        The sample that was run; empty for pools and blanks.
    role : tuple of {"sample", "pool", "blank"}
        A pool is a mixture of the samples, run again and again; a blank holds no sample.
    order : ndarray of shape (n_runs,)
        Place in the sequence of injections, NaN where unknown.
    batch, replicate : tuple of str
        Empty where unknown.
    """

    runs: tuple[str, ...]
    sample: tuple[str, ...]
    role: tuple[str, ...]
    order: Matrix
    batch: tuple[str, ...]
    replicate: tuple[str, ...]

    def __post_init__(self) -> None:
        sizes = {field.name: len(getattr(self, field.name)) for field in fields(self)}
        if len(set(sizes.values())) > 1:
            raise InputError(f"the columns of the run sheet differ in length: {sizes}")
        if len(set(self.runs)) < len(self.runs):
            raise InputError("run names stand more than once; every run needs its own name")
        wrong = sorted(set(self.role) - set(ROLES))
        if wrong:
            raise InputError(f"roles of runs that are none: {some(wrong)}; allowed: {', '.join(ROLES)}")
        nameless = [
            r for r, s, role in zip(self.runs, self.sample, self.role, strict=True) if _lacks(s, role)
        ]
        if nameless:
            raise InputError(f"runs of samples without the sample's name: {some(nameless)}; add it")

    def take(self, rows: Sequence[int] | Rows) -> Self:
        """Return some of the runs, in the order asked for."""
        places = np.asarray(rows, dtype=np.intp)
        parts: dict[str, Any] = {f.name: _taken(getattr(self, f.name), places) for f in fields(self)}
        return replace(self, **parts)

    def rows_of(self, samples: Sequence[str]) -> Rows:
        """Return the rows of these samples' runs: sample after sample, each one's runs as they stand."""
        places: dict[str, list[int]] = {}
        for row, (name, role) in enumerate(zip(self.sample, self.role, strict=True)):
            if role == "sample":
                places.setdefault(name, []).append(row)
        return np.array([row for name in samples for row in places.get(name, [])], dtype=np.intp)

    def rows_as(self, *roles: str) -> Rows:
        """Return the rows of these roles, in order."""
        return np.flatnonzero(np.isin(np.array(self.role, dtype=object), roles))


@dataclass(frozen=True, eq=False, kw_only=True)
class RunTable(Runs):
    """The runs of one block and their values, shape (n_runs, n_features), NaN where missing."""

    values: Matrix

    def for_samples(self, samples: Sequence[str]) -> RunTable:
        """Return the runs of these samples, and all pools and blanks."""
        return self.take(np.concatenate([self.rows_of(samples), self.rows_as("pool", "blank")]))

    def with_columns(self, columns: Sequence[int] | Rows | NDArray[np.bool_]) -> RunTable:
        """Return the runs with some of the features, in the order asked for."""
        return replace(self, values=self.values[:, np.asarray(columns)])


def run_table(sheet: pd.DataFrame, values: Matrix) -> RunTable:
    """Return the runs of a run sheet with their values.

    Parameters
    ----------
    sheet : DataFrame
        Indexed by run; columns ``sample`` and ``role``, and where known ``order``, ``batch``, ``replicate``.
        Further columns are left alone.
    values : ndarray of shape (n_runs, n_features)
        Rows in the order of the sheet.

    Examples
    --------
    >>> sheet = pd.DataFrame({"sample": ["S1", ""], "role": ["sample", "pool"], "order": [2, 1]}, index=["r1", "r2"])
    >>> table = run_table(sheet, np.array([[3.0], [4.0]]))
    >>> table.role, table.order.tolist(), table.batch
    (('sample', 'pool'), [2.0, 1.0], ('', ''))
    """
    order = sheet["order"] if "order" in sheet else pd.Series(np.nan, index=sheet.index)
    return RunTable(
        runs=tuple(map(str, sheet.index)),
        sample=_text(sheet, "sample"),
        role=_text(sheet, "role"),
        order=pd.to_numeric(order).to_numpy(dtype=np.float64),
        batch=_text(sheet, "batch"),
        replicate=_text(sheet, "replicate"),
        values=np.asarray(values, dtype=np.float64),
    )


def _lacks(sample: str, role: str) -> bool:
    return role == "sample" and not sample


def _taken(column: tuple[str, ...] | Matrix, places: Rows) -> tuple[str, ...] | Matrix:
    return column[places] if isinstance(column, np.ndarray) else tuple(column[place] for place in places)


def _text(sheet: pd.DataFrame, column: str) -> tuple[str, ...]:
    if column not in sheet:
        return ("",) * len(sheet)
    return tuple("" if pd.isna(cell) else str(cell) for cell in sheet[column])
