"""What a step is, and the steps that every kind of measurement shares.

A step is a small object: ``fit`` learns from the training samples alone and returns a fitted step,
whose ``transform`` works on any samples, seen or unseen, one by one: what comes out for a sample
never depends on the samples beside it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Protocol

import numpy as np
from numpy.typing import NDArray

from workbench.prepare.refusal import without_value
from workbench.prepare.tables import Mask, Matrix, StepAccount, StepTable
from workbench.prepare.words import percent

SEEN_SHARE = 0.7
FEWEST_SAMPLES = 2
FLAT = 1e-9
ENOUGH_REFERENCE = 100
FEWEST_FOR_SCALE = 10


@dataclass(frozen=True)
class FitContext:
    """What a fit may know beside the training table.

    Attributes
    ----------
    smallest_group : int or None
        Size of the smallest group among the training samples (its size alone, never who is in it).
    seed : int
        Key of all draws.
    """

    smallest_group: int | None
    seed: int


class FittedStep(Protocol):
    """A step that has learnt what it needs."""

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the table after the step, and the account of it."""
        ...


class Step(Protocol):
    """A rule that is yet to learn from training samples."""

    @property
    def step(self) -> str:
        """Name of the step."""
        ...

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        ...

    @property
    def why(self) -> str:
        """Why it is done, and done this way."""
        ...

    @property
    def paper(self) -> str:
        """Where the method comes from; empty when there is no paper."""
        ...

    @property
    def keys(self) -> tuple[str, ...]:
        """Keys of ``[blocks.NAME.prepare]`` that change it."""
        ...

    @property
    def runs_only(self) -> bool:
        """Whether it needs runs, pools or blanks; left out without a run sheet."""
        ...

    def fit(self, table: StepTable, context: FitContext) -> FittedStep:
        """Return the step as learnt from these samples."""
        ...


class Settled:
    """What most steps have in common: no settings of their own, no need of a run sheet."""

    why: ClassVar[str] = ""
    paper: ClassVar[str] = ""
    keys: ClassVar[tuple[str, ...]] = ()
    runs_only: ClassVar[bool] = False


@dataclass(frozen=True)
class KeepFeatures:
    """A fitted step that keeps some features and lists the others with the reason."""

    keep: Mask
    account: StepAccount

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the kept features of the table."""
        return table.keep(self.keep), self.account


def keep_features(
    step: str, rule: str, table: StepTable, keep: Mask, reasons: dict[str, str]
) -> KeepFeatures:
    """Return the fitted step that keeps ``keep``, its account filled in."""
    before, after = len(table.features), int(keep.sum())
    gone = f"{before - after:,} of {before:,} features dropped: {rule}"
    sentence = gone if after < before else f"none of {before:,} features dropped"
    return KeepFeatures(keep, StepAccount(step, sentence, {"before": before, "after": after}, reasons))


def column_range(values: Matrix) -> tuple[Matrix, Matrix]:
    """Return the smallest and the largest value of every column, missing ones aside (NaN when all are)."""
    return np.fmin.reduce(values, axis=0), np.fmax.reduce(values, axis=0)


def extremes(what: str, values: Matrix, samples: tuple[str, ...]) -> dict[str, float | int | str]:
    """Return the smallest and the largest of a figure of the samples, with their names.

    >>> extremes("shift", np.array([0.5, -2.0]), ("S1", "S2"))
    {'smallest_shift': -2.0, 'smallest_shift_in': 'S2', 'largest_shift': 0.5, 'largest_shift_in': 'S1'}
    """
    numbers: dict[str, float | int | str] = {}
    if values.size:
        for side, place in (("smallest", int(np.argmin(values))), ("largest", int(np.argmax(values)))):
            numbers |= {f"{side}_{what}": float(values[place]), f"{side}_{what}_in": samples[place]}
    return numbers


def check_found(what: str, values: Matrix, table: StepTable, n_features: int) -> Matrix:
    """Return the figures of the samples.

    Raises
    ------
    PrepareRefusal
        When one is NaN: the sample has nothing in any of the features that the figure rests on.
    """
    lost = [table.samples[row] for row in np.flatnonzero(np.isnan(values))]
    if lost:
        lacking = f"value in any of the {n_features:,} features that the {what} rests on"
        raise without_value(lacking, lost, len(table.samples))
    return values


def median_rows(values: Matrix, usable: Mask) -> Matrix:
    """Return each row's median over its usable cells, NaN where it has none."""
    if usable.all() and values.size:
        return np.median(values, axis=1)
    rows = (row[use] for row, use in zip(values, usable, strict=True))
    return np.array([np.median(row) if row.size else np.nan for row in rows], dtype=np.float64)


def most_seen(seen: NDArray[np.int_], enough: int = ENOUGH_REFERENCE) -> tuple[Mask, int]:
    """Return the features that are seen in the most samples, and in how many at least.

    The cut is the highest number of samples at which ``enough`` features are left (all features,
    when there are fewer): with enough complete features it is the number of samples.

    >>> most_seen(np.array([4, 4, 3, 1]), enough=2)
    (array([ True,  True, False, False]), 4)
    >>> most_seen(np.array([4, 4, 3, 1]), enough=3)
    (array([ True,  True,  True, False]), 3)
    """
    ranked = np.sort(seen)[::-1]
    cut = max(int(ranked[min(enough, ranked.size) - 1]), 1) if ranked.size else 1
    return seen >= cut, cut


def reference_features(seen: NDArray[np.int_], enough: int, fewest: int) -> tuple[Mask, int]:
    """Return the features of ``most_seen``; none of them when they are fewer than ``fewest``."""
    used, cut = most_seen(seen, enough)
    return (used, cut) if used.sum() >= fewest else (np.zeros_like(used), cut)


@dataclass(frozen=True)
class SwitchedOff:
    """A step that the settings leave out: it changes nothing, and the account says so."""

    step: str
    key: str
    needs_runs: bool = False

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"switched off by `{self.key}` in the settings"

    @property
    def why(self) -> str:
        """Why it is left out."""
        return "the settings say so"

    @property
    def paper(self) -> str:
        """Nothing to cite."""
        return ""

    @property
    def keys(self) -> tuple[str, ...]:
        """The key that switches it on again."""
        return (self.key,)

    @property
    def runs_only(self) -> bool:
        """Whether the step would need runs."""
        return self.needs_runs

    def fit(self, table: StepTable, context: FitContext) -> SwitchedOff:  # noqa: ARG002
        """Return the step itself."""
        return self

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the table as it is."""
        return table, StepAccount(self.step, self.rule)


@dataclass(frozen=True)
class DropUnusable(Settled):
    """Drops features without any value and features with one value only."""

    step: str = "unusable features"
    condition: str = "no value in any sample, or one and the same value wherever there is one"
    why: ClassVar[str] = "a feature that does not vary cannot go with another"

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"drops features with {self.condition}"

    def fit(self, table: StepTable, context: FitContext) -> KeepFeatures:  # noqa: ARG002
        """Return the step; constant means that smallest and largest value are equal."""
        low, high = column_range(table.values)
        empty, constant = np.isnan(low), low == high
        reasons = {table.features[i]: "no value in any sample" for i in np.flatnonzero(empty)}
        for i in np.flatnonzero(constant):
            reasons[table.features[i]] = (
                f"constant: {_in_words(low[i], table.levels[i])} wherever it has a value"
            )
        return keep_features(self.step, self.condition, table, ~(empty | constant), reasons)


def _in_words(value: float, levels: tuple[str, ...] | None) -> str:
    return f"{value:g}" if levels is None else f"'{levels[int(value)]}'"


@dataclass(frozen=True)
class DropRarelySeen(Settled):
    """Drops features with a value in too few samples.

    Kept are features seen in at least ``share`` of the smallest group's size (of all samples when
    there are no groups), and in no fewer than two samples. The size counts, never the labels: a
    feature that one group has and the other lacks is kept.
    """

    share: float = SEEN_SHARE
    step: str = "rarely seen features"
    why: ClassVar[str] = "a feature with more gaps than values would be mostly made up"
    keys: ClassVar[tuple[str, ...]] = ("seen_share",)

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return (
            f"keeps features measured in enough samples: at least {percent(self.share)} of the size of the smallest "
            "group (of all samples where there are no groups)"
        )

    def fit(self, table: StepTable, context: FitContext) -> KeepFeatures:
        """Return the step; numbers of samples are rounded up."""
        seen, n = table.samples_with(~np.isnan(table.values))
        size = n if context.smallest_group is None else context.smallest_group
        needed = max(int(np.ceil(self.share * size - 1e-9)), min(FEWEST_SAMPLES, n))
        keep = seen >= needed
        reasons = {
            table.features[i]: f"measured in {seen[i]} of {n} samples; {needed} needed"
            for i in np.flatnonzero(~keep)
        }
        rule = f"measured in fewer than {needed} of {n} samples ({percent(self.share)} of {size})"
        return keep_features(self.step, rule, table, keep, reasons)


@dataclass(frozen=True)
class DropFlat(Settled):
    """Drops features that preparation has left without variation.

    Flat means: the range over the training samples is at most 1e-9 times the largest absolute value.
    """

    step: str = "flat features"
    condition: str = "no variation left after the steps before"
    why: ClassVar[str] = "a feature that does not vary cannot go with another"

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"drops features with {self.condition}"

    def fit(self, table: StepTable, context: FitContext) -> KeepFeatures:  # noqa: ARG002
        """Return the step."""
        low, high = column_range(table.values)
        flat = high - low <= FLAT * np.maximum(np.abs(low), np.abs(high))
        reasons = {table.features[i]: self.condition for i in np.flatnonzero(flat)}
        return keep_features(self.step, self.condition, table, ~flat, reasons)
