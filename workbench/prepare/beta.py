"""Methylation: shares from 0 to 1 become M-values, log-ratios of methylated to unmethylated."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from workbench.intake.faults import counted
from workbench.prepare.combining import CombineRuns
from workbench.prepare.gaps import FillGaps
from workbench.prepare.refusal import VALUES, PrepareRefusal
from workbench.prepare.steps import DropFlat, DropRarelySeen, DropUnusable, FitContext, Settled, Step
from workbench.prepare.tables import Matrix, MeasuredTable, StepAccount, StepTable
from workbench.settings.prepare_schema import BetaPreparation

DU = "Du et al. 2010, BMC Bioinformatics 11:587"
OFFSET = 0.001


def beta_steps(settings: BetaPreparation) -> tuple[Step, ...]:
    """Return the steps for methylated shares, in order."""
    return (
        DropUnusable(),
        DropRarelySeen(settings.seen_share),
        MValues(settings.offset),
        CombineRuns(),
        FillGaps(censored=False),
        DropFlat(),
    )


def check_beta(table: MeasuredTable) -> None:
    """Refuse values outside 0 to 1.

    Raises
    ------
    PrepareRefusal
        Naming the first such cell.
    """
    outside = (table.values < 0) | (table.values > 1)
    if outside.any():
        percentages = not (table.values < 0).any()
        raise PrepareRefusal(
            f"{counted(int(outside.sum()), 'value is', 'values are')} outside 0 to 1, the first at "
            f"{table.first_cell(outside)}; methylated "
            f"shares are 0 to 1, {'percentages are not' if percentages else 'M-values are logarithms'}",
            key=VALUES,
            fitting=("continuous",) if percentages else ("log",),
            advice="divide percentages by 100" if percentages else "",
        )


def m_values(beta: Matrix, offset: float) -> Matrix:
    """Return M-values.

        M = log2((beta + offset) / (1 - beta + offset))

    Parameters
    ----------
    beta : ndarray
        Methylated shares, 0 to 1; NaN stays.
    offset : float
        Above 0; keeps 0 and 1 finite: they become -+ log2((1 + offset) / offset).

    References
    ----------
    Du, Zhang, Huang, Jafari, Kibbe, Hou & Lin 2010, BMC Bioinformatics 11:587 (equation 3, without offset).

    Examples
    --------
    >>> m_values(np.array([0.2, 0.5, 0.8]), 1e-12).round(6).tolist()
    [-2.0, 0.0, 2.0]
    """
    values: Matrix = np.log2((beta + offset) / (1.0 - beta + offset))
    return values


@dataclass(frozen=True)
class MValues(Settled):
    """Turns methylated shares into M-values."""

    offset: float = OFFSET
    step: str = "M-values"
    why: ClassVar[str] = (
        "shares near 0 and 1 hardly vary whatever happens there; their log-ratios vary alike everywhere"
    )
    paper: ClassVar[str] = DU
    keys: ClassVar[tuple[str, ...]] = ("offset",)

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        return f"takes M-values, log2((beta + {self.offset:g}) / (1 - beta + {self.offset:g}))"

    def fit(self, table: StepTable, context: FitContext) -> MValues:  # noqa: ARG002
        """Return the step itself: there is nothing to learn."""
        return self

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return M-values."""
        ends = int(((table.values == 0) | (table.values == 1)).sum())
        sentence = f"M-values of all; {ends:,} of {table.values.size:,} values were exactly 0 or 1"
        numbers: dict[str, float | int | str] = {"offset": self.offset, "zeros_and_ones": ends}
        account = StepAccount(self.step, sentence, numbers, reference=DU)
        return table.with_values(m_values(table.values, self.offset)), account
