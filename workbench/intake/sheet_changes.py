"""What would change if a sample sheet were replaced by another."""

from __future__ import annotations

from dataclasses import dataclass

import pandas as pd

from .faults import counted, shown
from .kinds import present
from .sides import Sides, sides


@dataclass(frozen=True)
class SheetDifference:
    """What is different between two sample sheets.

    Attributes
    ----------
    samples, columns
        What each side has alone.
    changed
        For each column of both, the samples whose cells differ, where there are some.
    examples
        For these columns, the first such cell: before and now, empty where missing.
    reordered
        Whether samples of both stand in another order.
    """

    samples: Sides
    columns: Sides
    changed: dict[str, tuple[str, ...]]
    examples: dict[str, tuple[str, str]]
    reordered: bool

    @property
    def same(self) -> bool:
        """Whether nothing is different."""
        return self.samples.same and self.columns.same and not self.changed and not self.reordered

    def lines(self) -> tuple[str, ...]:
        """Return sentences for a person who is about to replace a sample sheet."""
        if self.same:
            return ("nothing changes in the sample sheet: it is the same",)
        told = [self.samples.line("sample"), self.columns.line("column")]
        for name, samples in self.changed.items():
            before, now = (shown(cell) if cell else "missing" for cell in self.examples[name])
            told.append(
                f"column {shown(name)}: another value for {counted(len(samples), 'sample')}, "
                f"{shown(samples[0])} first: {before} before, {now} now"
            )
        return (*told, *(["samples stand in another order"] if self.reordered else []))


def sheet_difference(old: pd.DataFrame, new: pd.DataFrame) -> SheetDifference:
    """Return what changes when one sample sheet is replaced by another; both are indexed by sample id.

    Cells are compared as text without blanks at their ends; missing tokens are all the same.
    """
    samples = sides(list(old.index), list(new.index))
    before, after = (frame.set_axis([str(name) for name in frame.index], axis=0) for frame in (old, new))
    rows = [name for name in after.index if name in set(before.index)]
    changed: dict[str, tuple[str, ...]] = {}
    examples: dict[str, tuple[str, str]] = {}
    for name in [column for column in new if column in old]:
        here, there = (present(frame[name]).reindex(rows).fillna("") for frame in (before, after))
        other = [row for row in rows if here[row] != there[row]]
        if other:
            changed[str(name)] = tuple(other)
            examples[str(name)] = (here[other[0]], there[other[0]])
    reordered = rows != [name for name in before.index if name in set(rows)]
    return SheetDifference(samples, sides(list(old), list(new)), changed, examples, reordered)
