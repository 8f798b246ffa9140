"""What pools and blanks say of a feature: does the assay repeat it, and is it there without a sample."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from workbench.prepare.drift import relative_amounts, relative_sd
from workbench.prepare.local_lines import medians
from workbench.prepare.steps import FitContext, KeepFeatures, Settled, keep_features
from workbench.prepare.tables import Matrix, StepAccount, StepTable
from workbench.prepare.words import percent

LARGEST_SCATTER = 0.3
FEWEST_FOR_SCATTER = 4
BLANK_RATIO = 3.0
MOST_DROPPED = 0.5


@dataclass(frozen=True)
class PoolScatter(Settled):
    """Drops features that scatter too much over the pools.

    Scatter is the relative standard deviation over the pools after drift is taken away, each pool by a course
    that has not seen it. Features that fewer than four pools have are kept, and counted in the account.
    """

    logged: bool = False
    largest: float = LARGEST_SCATTER
    step: str = "pool scatter"
    why: ClassVar[str] = (
        "pools are one mixture measured again and again; what the assay cannot repeat there says nothing of the samples"
    )
    paper: ClassVar[str] = "Dunn et al. 2011, Nature Protocols 6:1060; limit: common practice"
    keys: ClassVar[tuple[str, ...]] = ("pool_filter", "pool_scatter")
    runs_only: ClassVar[bool] = True

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"drops features whose {self._condition}"

    @property
    def _condition(self) -> str:
        return f"relative standard deviation over the pools is above {percent(self.largest)}"

    def fit(self, table: StepTable, context: FitContext) -> KeepFeatures:  # noqa: ARG002
        """Return the step; pools alone decide."""
        values = _controls(table, "pool")
        pools = relative_amounts(values, self.logged)
        seen = (~np.isnan(pools)).sum(axis=0)
        scatter = np.where(seen >= FEWEST_FOR_SCATTER, relative_sd(pools), np.nan)
        wide = scatter > self.largest
        reasons = {
            table.features[i]: f"relative standard deviation of {percent(scatter[i])} over {seen[i]} pools; "
            f"{percent(self.largest)} allowed"
            for i in np.flatnonzero(wide)
        }
        judged = scatter[~np.isnan(scatter)]
        numbers: dict[str, float | int | str] = {
            "pools": len(pools),
            "not_judged": len(scatter) - judged.size,
            "largest_allowed": self.largest,
        }
        if judged.size:
            numbers["median_scatter"] = float(np.median(judged))
        return _with_numbers(
            keep_features(self.step, self._condition, table, ~wide, reasons), numbers, self._cautions(judged)
        )

    def _cautions(self, judged: Matrix) -> tuple[str, ...]:
        if not judged.size:
            return (f"pool scatter not judged: no feature is in {FEWEST_FOR_SCATTER} pools",)
        share = float(np.mean(judged > self.largest))
        if share <= MOST_DROPPED:
            return ()
        return (
            f"{percent(share)} of the features are dropped, as they scatter over the pools (by "
            f"{percent(float(np.median(judged)))} in the middle): drift that too few pools could show, pools that are "
            "not one mixture, or an assay that does not repeat",
        )


@dataclass(frozen=True)
class BlankFilter(Settled):
    """Drops features that are not clearly stronger in samples than in blanks.

    Compared are the median over the training runs that have the feature and the median over the blanks, where
    a blank without the feature counts as zero.
    """

    ratio: float = BLANK_RATIO
    step: str = "blanks"
    why: ClassVar[str] = "what is there without a sample comes from solvent, tube or column, not from biology"
    paper: ClassVar[str] = "common practice"
    keys: ClassVar[tuple[str, ...]] = ("blanks", "blank_ratio")
    runs_only: ClassVar[bool] = True

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"drops features that are {self._condition}"

    @property
    def _condition(self) -> str:
        return f"less than {self.ratio:g} times as strong in samples as in blanks"

    def fit(self, table: StepTable, context: FitContext) -> KeepFeatures:  # noqa: ARG002
        """Return the step as learnt from training runs and blanks."""
        blanks = _controls(table, "blank")
        if not len(blanks):
            keep = np.ones(len(table.features), dtype=bool)
            account = StepAccount(self.step, "no blanks in the run sheet: nothing dropped", {"blanks": 0})
            return KeepFeatures(keep, account)
        empty = np.median(np.nan_to_num(blanks), axis=0)
        strong = medians(table.values)
        explained = (empty > 0) & ~(strong >= self.ratio * empty)
        reasons = {
            table.features[i]: f"{strong[i] / empty[i]:.2g} times as strong in samples as in blanks; "
            f"{self.ratio:g} needed"
            for i in np.flatnonzero(explained)
        }
        fitted = keep_features(self.step, self._condition, table, ~explained, reasons)
        return _with_numbers(fitted, {"blanks": len(blanks), "ratio": self.ratio}, ())


def _controls(table: StepTable, role: str) -> Matrix:
    if table.controls is None:
        return np.empty((0, len(table.features)))
    return table.controls.values[table.controls.rows_as(role)]


def _with_numbers(
    fitted: KeepFeatures, numbers: dict[str, float | int | str], cautions: tuple[str, ...]
) -> KeepFeatures:
    account = fitted.account
    full = StepAccount(
        account.step, account.sentence, account.numbers | numbers, account.dropped, cautions=cautions
    )
    return KeepFeatures(fitted.keep, full)
