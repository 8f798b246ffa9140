"""Mixed readings (clinical): numbers and text.

Numbers are kept. Text with two levels becomes one indicator ``column=level`` of the level that comes last in their
order; text with more becomes one per level. Levels are those that the training samples have; any other
level counts as missing. A gap says nothing: a number becomes the training median, a 0 / 1 column the
share of ones in training. Text whose levels have an order, which only the settings can tell, becomes 0, 1, 2 ...
in that order.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.prepare.refusal import PrepareRefusal
from workbench.prepare.steps import DropFlat, DropRarelySeen, DropUnusable, FitContext, Settled, Step
from workbench.prepare.tables import Matrix, MeasuredTable, StepAccount, StepTable, some
from workbench.prepare.transforms import transform_steps
from workbench.settings.prepare_schema import MixedPreparation

SMALLEST_LEVEL = 2


def mixed_steps(settings: MixedPreparation) -> tuple[Step, ...]:
    """Return the steps for mixed values, in order."""
    return (
        DropUnusable(),
        DropRarelySeen(settings.seen_share),
        *transform_steps(settings),
        TextToNumbers(tuple(settings.ordered.items())),
        TypicalValues(),
        DropFlat(),
    )


def check_mixed(table: MeasuredTable) -> None:
    """Refuse text cells whose code is not the position of a level.

    Raises
    ------
    InputError
        Naming the features.
    """
    faulty = []
    for column, levels in enumerate(table.feature_levels):
        if levels is None:
            continue
        codes = table.values[:, column]
        codes = codes[~np.isnan(codes)]
        if np.any((codes < 0) | (codes >= len(levels)) | (codes != np.floor(codes))):
            faulty.append(table.features[column])
    if faulty:
        raise InputError(
            f"text features with codes that are no position of a level: {some(faulty)}; "
            "text is given as whole numbers from 0 to the number of levels less 1"
        )


@dataclass(frozen=True)
class TextCode:
    """How one measured feature becomes columns.

    Attributes
    ----------
    feature : str
        The measured feature.
    levels : tuple of str
        Levels seen in training, in order; empty for a number.
    columns : tuple of (name, level)
        Columns made, each 1 at its level; a number has one, of its own name.
    ordered : bool
        Whether the levels become 0, 1, 2 ... in one column.
    """

    feature: str
    levels: tuple[str, ...]
    columns: tuple[tuple[str, str], ...]
    ordered: bool = False

    def encode(self, values: Matrix, levels: tuple[str, ...] | None) -> Matrix:
        """Return the columns of these cells, (n_samples, n_columns); NaN for gaps and unknown levels."""
        if not self.levels:
            return values[:, None]
        names = np.array([*(levels or ()), ""], dtype=object)
        codes = np.where(np.isnan(values), len(names) - 1, values).astype(np.intp)
        cells = names[codes]
        known = np.isin(cells, np.array(self.levels, dtype=object)) & ~np.isnan(values)
        if self.ordered:
            places = {level: float(place) for place, level in enumerate(self.levels)}
            return np.array([places.get(cell, np.nan) for cell in cells])[:, None]
        hits = np.column_stack([cells == level for _, level in self.columns]).astype(np.float64)
        hits[~known] = np.nan
        return hits


@dataclass(frozen=True)
class TextToNumbers(Settled):
    """Turns text into numbers; levels of fewer than two training samples make no 0 / 1 column.

    Parameters
    ----------
    ordered : tuple of (feature, levels)
        Text whose levels have an order, lowest first: it becomes one column of 0, 1, 2 ...
    """

    ordered: tuple[tuple[str, tuple[str, ...]], ...] = ()
    smallest: int = SMALLEST_LEVEL
    step: str = "text to numbers"
    why: ClassVar[str] = "correlation needs numbers; an order of levels is known to their owner alone"
    keys: ClassVar[tuple[str, ...]] = ("ordered",)

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        plain = (
            "turns text of two levels into a column of 0 / 1, other text into one per level, named column=level for "
            "the level that is 1"
        )
        return (
            f"{plain}; {some([name for name, _ in self.ordered])} into 0, 1, 2 ..." if self.ordered else plain
        )

    def fit(self, table: StepTable, context: FitContext) -> FittedText:  # noqa: ARG002
        """Return the step with the levels that these samples have."""
        codes, dropped = [], {}
        for column, levels in enumerate(table.levels):
            code, reasons = self._code(table.features[column], table.values[:, column], levels)
            codes.append(code)
            dropped.update(reasons)
        names = Counter(name for code in codes for name, _ in code.columns)
        twice = sorted(name for name, count in names.items() if count > 1)
        if twice:
            raise InputError(f"a feature has the name of another's indicator: {some(twice)}; rename it")
        return FittedText(self, tuple(codes), dropped)

    def _code(
        self, feature: str, values: Matrix, levels: tuple[str, ...] | None
    ) -> tuple[TextCode, dict[str, str]]:
        if levels is None:
            return TextCode(feature, (), ((feature, ""),)), {}
        order = dict(self.ordered).get(feature)
        if order is not None:
            _check_listed(feature, values, levels, order)
            return TextCode(feature, order, ((feature, ""),), ordered=True), {}
        counts = np.bincount(values[~np.isnan(values)].astype(np.intp), minlength=len(levels))
        seen = tuple(level for level, count in zip(levels, counts, strict=True) if count)
        rare = {f"{feature}={level}": int(count) for level, count in zip(levels, counts, strict=True)}
        rare = {name: count for name, count in rare.items() if 0 < count < self.smallest}
        if len(seen) <= 2:
            name = f"{feature}={seen[-1]}" if len(seen) == 2 else feature
            columns: tuple[tuple[str, str], ...] = () if rare else ((name, seen[-1]),)
            reasons = {feature: f"a level in only {min(rare.values())} sample"} if rare else {}
            return TextCode(feature, seen, columns), reasons
        named = ((f"{feature}={level}", level) for level in seen)
        columns = tuple((name, level) for name, level in named if name not in rare)
        return TextCode(feature, seen, columns), {
            name: f"the level in only {count} sample" for name, count in rare.items()
        }


def _check_listed(feature: str, values: Matrix, levels: tuple[str, ...], order: tuple[str, ...]) -> None:
    seen = {levels[int(code)] for code in values[~np.isnan(values)]}
    beyond = sorted(seen - set(order))
    if beyond:
        raise PrepareRefusal(
            f"levels of '{feature}' that `ordered` does not list: {some(beyond)}; it names every level, lowest first",
            key="prepare.ordered",
        )


@dataclass(frozen=True)
class FittedText:
    """The columns that text becomes."""

    settings: TextToNumbers
    codes: tuple[TextCode, ...]
    dropped: dict[str, str]

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the table with text as numbers."""
        parts = [
            code.encode(table.values[:, i], table.levels[i])
            for i, code in enumerate(self.codes)
            if code.columns
        ]
        n = len(table.samples)
        values = np.column_stack(parts) if parts else np.empty((n, 0))
        features = tuple(name for code in self.codes for name, _ in code.columns)
        origins = tuple(code.feature for code in self.codes for _ in code.columns)
        coded = replace(
            table,
            values=values,
            imputed=np.zeros(values.shape, dtype=bool),
            features=features,
            origins=origins,
            levels=(None,) * len(features),
        )
        return coded, self._account(table)

    def _account(self, table: StepTable) -> StepAccount:
        text = [code for code in self.codes if code.levels]
        kept, indicators = len(self.codes) - len(text), sum(len(code.columns) for code in text)
        numbers: dict[str, float | int | str] = {"numbers": kept, "text": len(text), "indicators": indicators}
        for code in text:
            if code.ordered:
                listed = ", ".join(f"{place} = {level}" for place, level in enumerate(code.levels))
                numbers[f"coding of {code.feature}"] = listed
            elif len(code.levels) == 2 and code.columns:
                numbers[f"coding of {code.feature}"] = f"0 = {code.levels[0]}, 1 = {code.levels[1]}"
        unknown = self._unknown(table)
        numbers |= {
            f"levels of {feature} not in training": ", ".join(names) for feature, names in unknown.items()
        }
        sentence = (
            f"{counted(kept, 'numeric feature')} kept, {counted(len(text), 'text feature')} turned into "
            f"{counted(indicators, 'column')} of numbers"
        )
        if unknown:
            sentence += f"; levels that training lacks count as missing ({some(list(unknown))})"
        return StepAccount(self.settings.step, sentence, numbers, self.dropped)

    def _unknown(self, table: StepTable) -> dict[str, list[str]]:
        unknown = {}
        for column, code in enumerate(self.codes):
            levels = table.levels[column]
            if not code.levels or levels is None:
                continue
            codes = table.values[:, column]
            names = {levels[int(value)] for value in codes[~np.isnan(codes)]} - set(code.levels)
            if names:
                unknown[code.feature] = sorted(names)
        return unknown


@dataclass(frozen=True)
class TypicalValues(Settled):
    """Fills gaps so that they say nothing: the median of numbers, the share of ones of 0 / 1 columns."""

    step: str = "gaps"
    why: ClassVar[str] = "a typical value claims nothing of the sample that has the gap"
    rule: str = "fills a gap with the median of a number, with the share of ones of a 0 / 1 column"

    def fit(self, table: StepTable, context: FitContext) -> FittedTypical:  # noqa: ARG002
        """Return the step with the typical value of each column."""
        typical = np.array([_typical(column[~np.isnan(column)]) for column in table.values.T])
        return FittedTypical(self, typical)


def _typical(values: Matrix) -> float:
    binary = np.isin(values, (0.0, 1.0)).all()
    return float(np.mean(values) if binary else np.median(values))


@dataclass(frozen=True)
class FittedTypical:
    """Typical values of the training samples."""

    settings: TypicalValues
    typical: Matrix

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the table without gaps."""
        gaps = np.isnan(table.values)
        count = int(gaps.sum())
        sentence = (
            f"{counted(count, 'gap')} filled; a filled-in value says nothing of its sample"
            if count
            else "no gaps"
        )
        account = StepAccount(self.settings.step, sentence, {"gaps": count, "values": gaps.size})
        filled = np.where(gaps, self.typical, table.values)
        return replace(table, values=filled, imputed=table.imputed | gaps), account
