"""What would change if a delivered table were replaced by another."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from .faults import counted, listed, shown
from .sides import Sides, sides

if TYPE_CHECKING:
    import anndata


@dataclass(frozen=True)
class Change:
    """The value of one cell before and after; numbers, or the texts of a mixed block."""

    sample: str
    feature: str
    old: float | str
    new: float | str

    def __str__(self) -> str:
        values = [
            f"{value:.6g}" if isinstance(value, float) else shown(value) for value in (self.old, self.new)
        ]
        return (
            f"sample {shown(self.sample)}, feature {shown(self.feature)}: {values[0]} before, {values[1]} now"
        )


@dataclass(frozen=True)
class BlockDifference:
    """What is different between two forms of a block.

    Attributes
    ----------
    samples, features
        What each side has alone.
    compared
        Number of cells of samples and features that both have.
    changed
        How many of them hold another value.
    largest
        The change of a number that is largest, in the unit of the values (ties: the first in the new order);
        without numbers the first text that changed; None when nothing changed.
    gaps_filled, gaps_new
        Cells that were missing and are not now, and the other way round.
    retyped
        Features of a mixed block that were numbers and are text now, or the other way round; their cells are not
        compared.
    annotations
        Features of both whose annotations differ.
    runs
        What each side's run sheet has alone; None where neither has one.
    declared
        What is said of the table otherwise: ``values: counts before, log now``.
    """

    samples: Sides
    features: Sides
    compared: int
    changed: int
    largest: Change | None
    gaps_filled: int
    gaps_new: int
    retyped: tuple[str, ...]
    annotations: tuple[str, ...]
    runs: Sides | None
    declared: tuple[str, ...]

    @property
    def same(self) -> bool:
        """Whether nothing is different."""
        sides = (self.samples, self.features, *([self.runs] if self.runs else []))
        cells = self.changed or self.gaps_filled or self.gaps_new
        return all(side.same for side in sides) and not (
            cells or self.retyped or self.annotations or self.declared
        )

    def lines(self) -> tuple[str, ...]:
        """Return sentences for a person who is about to replace a table."""
        if self.same:
            return ("nothing changes: samples, features and values are the same",)
        told = [self.samples.line("sample"), self.features.line("feature"), self._values()]
        if self.retyped:
            told.append(f"features that change between number and text: {listed(self.retyped, 5)}")
        if self.runs is not None:
            told.append(self.runs.line("run"))
        if self.annotations:
            found = counted(len(self.annotations), "feature")
            told.append(f"annotations: other ones for {found} ({listed(self.annotations, 5)})")
        return (*told, *self.declared)

    def _values(self) -> str:
        if not self.compared:
            return "values: no cell of both to compare"
        share = 100 * self.changed / self.compared
        told = f"values: {self.changed:,} of {self.compared:,} cells of both changed ({share:.3g} %)"
        told += f", most in {self.largest}" if self.largest else ""
        gaps = [f"{counted(self.gaps_filled, 'gap')} filled"] if self.gaps_filled else []
        gaps += [f"{counted(self.gaps_new, 'gap')} new"] if self.gaps_new else []
        return "; ".join([told, *gaps])


def difference(old: anndata.AnnData, new: anndata.AnnData) -> BlockDifference:
    """Return what changes when one form of a block is replaced by another.

    Samples and features are matched by name, whatever their order; values are compared exactly, the texts of
    mixed blocks as texts and not by their codes.
    """
    samples, features = sides(old.obs_names, new.obs_names), sides(old.var_names, new.var_names)
    rows, shared = _shared(old.obs_names, new.obs_names), _shared(old.var_names, new.var_names)
    text_before, text_now = _text_features(old), _text_features(new)
    retyped = tuple(name for name in shared if (name in text_before) != (name in text_now))
    numbers = [name for name in shared if name not in text_before | text_now]
    texts = [name for name in shared if name in text_before & text_now]
    found = _numbers(_cells(old, rows, numbers), _cells(new, rows, numbers), rows, numbers)
    words = _texts(old, new, rows, texts)
    return BlockDifference(
        samples=samples,
        features=features,
        compared=len(rows) * (len(numbers) + len(texts)),
        changed=found.changed + words.changed,
        largest=found.largest or words.largest,
        gaps_filled=found.filled + words.filled,
        gaps_new=found.emptied + words.emptied,
        retyped=retyped,
        annotations=_other_annotations(old.var, new.var, shared),
        runs=_runs(old, new),
        declared=tuple(_declared(old, new)),
    )


@dataclass(frozen=True)
class _Cells:
    changed: int
    largest: Change | None
    filled: int
    emptied: int


def _cells(adata: anndata.AnnData, rows: Sequence[str], columns: Sequence[str]) -> np.ndarray:
    where = np.ix_(adata.obs_names.get_indexer(list(rows)), adata.var_names.get_indexer(list(columns)))
    return np.asarray(adata.X)[where]


def _numbers(old: np.ndarray, new: np.ndarray, rows: Sequence[str], columns: Sequence[str]) -> _Cells:
    lacking, lacking_now = np.isnan(old), np.isnan(new)
    other = (old != new) & ~lacking & ~lacking_now
    largest = None
    if other.any():
        with np.errstate(over="ignore"):
            size = np.where(other, np.abs(np.where(other, new, 0) - np.where(other, old, 0)), -1.0)
        i, j = map(int, np.unravel_index(int(np.argmax(size)), size.shape))
        largest = Change(rows[i], columns[j], float(old[i, j]), float(new[i, j]))
    return _Cells(
        int(other.sum()), largest, int((lacking & ~lacking_now).sum()), int((lacking_now & ~lacking).sum())
    )


def _shared(old: pd.Index, new: pd.Index) -> list[str]:
    """Return the names of both, in the new order."""
    known = set(old)
    return [name for name in new if name in known]


def _text_features(adata: anndata.AnnData) -> set[str]:
    """Return the features of a mixed block that are text."""
    if "levels" not in adata.var:
        return set()
    return {name for name, levels in adata.var["levels"].items() if levels}


def _texts(
    old: anndata.AnnData, new: anndata.AnnData, rows: Sequence[str], features: Sequence[str]
) -> _Cells:
    changed = filled = emptied = 0
    first = None
    for feature in features:
        before, after = (_words(adata, rows, feature) for adata in (old, new))
        for sample, here, there in zip(rows, before, after, strict=True):
            filled += here is None and there is not None
            emptied += here is not None and there is None
            if here is not None and there is not None and here != there:
                changed += 1
                first = first or Change(sample, feature, here, there)
    return _Cells(changed, first, filled, emptied)


def _words(adata: anndata.AnnData, rows: Sequence[str], feature: str) -> list[str | None]:
    levels = json.loads(adata.var.at[feature, "levels"])
    codes = _cells(adata, rows, [feature])[:, 0]
    return [None if np.isnan(code) else levels[int(code)] for code in codes]


def _other_annotations(old: pd.DataFrame, new: pd.DataFrame, shared: Sequence[str]) -> tuple[str, ...]:
    names = dict.fromkeys([*map(str, old.columns), *map(str, new.columns)])
    mixed = "levels" in names
    columns = [name for name in names if not (mixed and name in ("kind", "levels"))]
    if not columns:
        return ()
    differ = (_written(old, shared, columns) != _written(new, shared, columns)).any(axis=1)
    return tuple(name for name, other in zip(shared, differ, strict=True) if other)


def _written(var: pd.DataFrame, features: Sequence[str], columns: Sequence[str]) -> np.ndarray:
    """Return annotations as text, empty where there is none."""
    return var.reindex(index=list(features), columns=list(columns)).fillna("").astype(str).to_numpy()


def _runs(old: anndata.AnnData, new: anndata.AnnData) -> Sides | None:
    names = [list(adata.uns["run_sheet"].index) if "run_sheet" in adata.uns else [] for adata in (old, new)]
    return sides(*names) if any(names) else None


def _declared(old: anndata.AnnData, new: anndata.AnnData) -> list[str]:
    before, after = (json.loads(adata.uns.get("workbench", "{}")) for adata in (old, new))
    return [
        f"{key}: {before.get(key)} before, {after.get(key)} now"
        for key in ("layer", "values")
        if before.get(key) != after.get(key)
    ]
