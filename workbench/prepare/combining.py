"""The runs of a sample become one row."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import ClassVar, Literal

import numpy as np

from workbench.intake.faults import counted
from workbench.prepare.steps import FitContext, Settled
from workbench.prepare.tables import Matrix, StepAccount, StepTable


@dataclass(frozen=True)
class CombineRuns(Settled):
    """Combines the runs of each sample: their mean, or their sum for counts.

    A cell is missing only where no run of the sample has it: the mean is over the runs that have a value. Pools
    and blanks end here.
    """

    how: Literal["mean", "sum"] = "mean"
    step: str = "runs"
    why: ClassVar[str] = "two runs of one sample are not two samples"
    runs_only: ClassVar[bool] = True

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"joins the runs of a sample into their {self.how}; pools and blanks have served, and end here"

    def fit(self, table: StepTable, context: FitContext) -> CombineRuns:  # noqa: ARG002
        """Return the step itself: there is nothing to learn."""
        return self

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return one row per sample."""
        if table.runs is None:
            return table, StepAccount(self.step, "no run sheet: every row is a sample")
        names = table.runs.sample
        starts = [row for row, name in enumerate(names) if row == 0 or name != names[row - 1]]
        sizes = np.diff([*starts, len(names)])
        combined = replace(
            table,
            values=_combined(table.values, starts, self.how),
            imputed=np.zeros((len(starts), len(table.features)), dtype=bool),
            samples=tuple(names[row] for row in starts),
            scale=_combined(table.scale[:, None], starts, "mean")[:, 0],
            runs=None,
            controls=None,
            delivered=None,
        )
        return combined, self._account(table, sizes)

    def _account(self, table: StepTable, sizes: np.ndarray) -> StepAccount:
        controls = 0 if table.controls is None else len(table.controls.runs)
        several = int((sizes > 1).sum())
        numbers: dict[str, float | int | str] = {
            "runs": len(table.samples),
            "samples": len(sizes),
            "samples_with_several_runs": several,
            "pools_and_blanks": controls,
        }
        sentence = (
            f"{len(table.samples):,} runs of {len(sizes):,} samples combined to their {self.how} "
            f"({counted(several, 'sample')} with several runs); pools and blanks left out: {controls}"
        )
        return StepAccount(self.step, sentence, numbers)


def _combined(values: Matrix, starts: list[int], how: str) -> Matrix:
    """Return sum or mean of each part that begins at ``starts``, over what is not missing; NaN without any."""
    if not starts:
        return values
    seen = ~np.isnan(values)
    counts = np.add.reduceat(seen.astype(np.int64), starts, axis=0)
    sums: Matrix = np.add.reduceat(np.where(seen, values, 0.0), starts, axis=0)
    divisor = np.maximum(counts, 1) if how == "mean" else 1
    return np.where(counts > 0, sums / divisor, np.nan)
