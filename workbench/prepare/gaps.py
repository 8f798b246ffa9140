"""Gaps: left-censored ones drawn from the low tail, the rest filled from similar training samples."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from workbench.prepare.censoring import Censoring, LowTails, find_censoring, fit_low_tails
from workbench.prepare.draws import cell_uniforms, name_keys
from workbench.prepare.neighbours import Donors, neighbour_count
from workbench.prepare.steps import FitContext
from workbench.prepare.tables import Mask, Matrix, StepAccount, StepTable

TROYANSKAYA = "Troyanskaya et al. 2001, Bioinformatics 17:520"


@dataclass(frozen=True)
class FillGaps:
    """Fills every gap and marks it in the mask.

    Parameters
    ----------
    censored : bool
        Look for left-censored gaps (see ``censoring``). Without, or without evidence, all gaps are
        filled from neighbours.
    """

    censored: bool
    step: str = "gaps"

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        neighbours = "gaps filled by the mean of the nearest training samples that have the feature"
        if not self.censored:
            return neighbours
        return (
            f"left-censored gaps drawn from the low tail where the table shows censoring, other {neighbours}"
        )

    def fit(self, table: StepTable, context: FitContext) -> FittedGaps:
        """Return the step with donors, evidence and low tails learnt from these samples."""
        p = len(table.features)
        none = Censoring(False, np.zeros(p, dtype=bool), 0.0, 0.0, 0.0)
        censoring = find_censoring(table.values) if self.censored else none
        tails = fit_low_tails(table.values[:, censoring.censored])
        donors = Donors(table.values, table.samples, neighbour_count(len(table.samples)))
        return FittedGaps(self, context.seed, donors, censoring, tails)


@dataclass(frozen=True)
class FittedGaps:
    """Donors and low tails of the training samples."""

    settings: FillGaps
    seed: int
    donors: Donors
    censoring: Censoring
    tails: LowTails

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the table without gaps."""
        gaps = np.isnan(table.values)
        if not gaps.any():
            return table, StepAccount(self.settings.step, "no gaps", {"gaps": 0, "values": gaps.size})
        low = gaps & self.censoring.censored
        filled = self.donors.estimates(table.values, gaps & ~low, table.samples)
        if low.any():
            filled = np.where(low, self._draws(table), filled)
        account = self._account(gaps, low)
        return replace(table, values=filled, imputed=table.imputed | gaps), account

    def _draws(self, table: StepTable) -> Matrix:
        columns = np.flatnonzero(self.censoring.censored)
        rows = name_keys(table.samples, self.seed, "sample")
        keys = name_keys([table.features[column] for column in columns], self.seed, "feature")
        draws = np.full(table.values.shape, np.nan)
        draws[:, columns] = self.tails.draw(cell_uniforms(rows[:, None], keys[None, :]))
        return draws

    def _account(self, gaps: Mask, low: Mask) -> StepAccount:
        total, drawn = int(gaps.sum()), int(low.sum())
        numbers: dict[str, float | int | str] = {
            "gaps": total,
            "values": gaps.size,
            "from_low_tail": drawn,
            "from_neighbours": total - drawn,
            "neighbours": self.donors.k,
        }
        if self.settings.censored:
            numbers |= {
                "censored_features": int(self.censoring.censored.sum()),
                "gap_rate_weakest_third": self.censoring.low_rate,
                "gap_rate_strongest_third": self.censoring.high_rate,
                "rank_correlation": self.censoring.rank_correlation,
            }
        return StepAccount(self.settings.step, self._sentence(gaps, drawn), numbers, reference=TROYANSKAYA)

    def _sentence(self, gaps: Mask, drawn: int) -> str:
        total = int(gaps.sum())
        start = f"{total:,} gaps ({total / gaps.size:.1%} of the values) filled: "
        rest = f"{total - drawn:,} by the mean of the {self.donors.k} nearest training samples with a value"
        if not self.settings.censored:
            return start + rest
        low, high = self.censoring.low_rate, self.censoring.high_rate
        rates = f"gaps in {low:.1%} of the weakest third, {high:.1%} of the strongest"
        if not self.censoring.evident:
            return f"{start}{rest}; no evidence that gaps stand for small amounts ({rates})"
        features = int(self.censoring.censored.sum())
        return (
            f"{start}{drawn:,} in {features:,} features drawn from the low tail, as missingness falls with "
            f"abundance ({rates}); {rest}"
        )
