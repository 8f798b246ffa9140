"""Gaps: left-censored ones drawn from the low tail, the rest filled from similar training samples."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workbench.prepare.censoring import Censoring, find_censoring, no_censoring
from workbench.prepare.draws import uniform_table
from workbench.prepare.low_tails import LowTails, fit_low_tails
from workbench.prepare.neighbours import Donors, neighbour_count
from workbench.prepare.steps import FitContext, Settled
from workbench.prepare.tables import Mask, Matrix, StepAccount, StepTable, some
from workbench.prepare.words import percent

WARNED_SAMPLE = 0.3
WARNED_FEATURE = 0.5
NEIGHBOURS = "Troyanskaya et al. 2001, Bioinformatics 17:520"
LOW_TAIL = "Tobin 1958, Econometrica 26:24"


@dataclass(frozen=True)
class FillGaps(Settled):
    """Fills every gap and marks it in the mask.

    Parameters
    ----------
    censored : bool
        Look for left-censored gaps (see ``censoring`` and ``low_tails``). Without, or without evidence, all
        gaps are filled from neighbours.
    settable : bool
        Whether the settings of the block can choose.
    """

    censored: bool
    settable: bool = False
    step: str = "gaps"

    @property
    def keys(self) -> tuple[str, ...]:  # type: ignore[override]
        """The key that chooses, where there is one."""
        return ("gaps",) if self.settable else ()

    @property
    def why(self) -> str:  # type: ignore[override]
        """Why gaps are filled so."""
        chance = "a gap by chance says nothing of its value, and samples that are alike otherwise are the best guess"
        return (
            f"a gap that stands for too little to be seen is a low value; {chance}"
            if self.censored
            else chance
        )

    @property
    def paper(self) -> str:  # type: ignore[override]
        """Where the methods come from."""
        return f"{NEIGHBOURS}; {LOW_TAIL}" if self.censored else NEIGHBOURS

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        neighbours = "gap is filled with the mean of the feature over the samples most like this one"
        if not self.censored:
            return f"every {neighbours}"
        return (
            "where weak features have more gaps than strong ones, a gap of a weak feature is taken for a value under "
            f"the detection limit and drawn from there; every other {neighbours}"
        )

    def fit(self, table: StepTable, context: FitContext) -> FittedGaps:
        """Return the step with donors, evidence and low tails learnt from these samples."""
        censoring = find_censoring(table.values) if self.censored else no_censoring(len(table.features))
        weak = table.values[:, censoring.censored]
        tails = fit_low_tails(weak, table.scale, censoring.random_rate)
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
        columns = np.flatnonzero(self.censoring.censored)
        drawn = self._draws(table, gaps, columns)
        low, rest = ~np.isnan(drawn), gaps.copy()
        rest[:, columns] &= ~low
        filled = self.donors.estimates(table.values, rest, table.samples)
        filled[:, columns] = np.where(low, drawn, filled[:, columns])
        account = self._account(gaps, int(low.sum()), table)
        return replace(table, values=filled, imputed=table.imputed | gaps), account

    def _draws(self, table: StepTable, gaps: Mask, columns: NDArray[np.intp]) -> Matrix:
        """Return draws for the left-censored gaps of these columns, NaN for all their other cells.

        A gap of a censored feature is left-censored with the probability that its sample's limit gives it.
        """
        if not columns.size:
            return np.empty((len(table.samples), 0))
        names = [table.features[column] for column in columns]
        lots = uniform_table(self.seed, table.samples, names, "censored or random")
        low = gaps[:, columns] & (lots < self.tails.censored_chances(table.scale))
        quantiles = uniform_table(self.seed, table.samples, names, "low tail")
        return np.where(low, self.tails.draw(quantiles, table.scale), np.nan)

    def _account(self, gaps: Mask, drawn: int, table: StepTable) -> StepAccount:
        total = int(gaps.sum())
        rows, columns = gaps.mean(axis=1), gaps.mean(axis=0)
        numbers: dict[str, float | int | str] = {
            "gaps": total,
            "values": gaps.size,
            "from_under_the_limit": drawn,
            "from_similar_samples": total - drawn,
            "similar_samples_each": self.donors.k,
            "largest_share_of_a_sample": float(rows.max()),
            "largest_share_of_a_feature": float(columns.max()),
            "features_filled_by_more_than_half": int((columns > WARNED_FEATURE).sum()),
        }
        if self.settings.censored:
            numbers |= {
                "features_with_low_gaps": int(self.censoring.censored.sum()),
                "gap_share_of_weakest_third": self.censoring.low_rate,
                "gap_share_of_strongest_third": self.censoring.high_rate,
                "rank_correlation_of_gaps_and_abundance": self.censoring.rank_correlation,
            }
        cautions = self._cautions(rows, columns, table)
        sentence = self._sentence(gaps, drawn)
        return StepAccount(
            self.settings.step, sentence, numbers, reference=self.settings.paper, cautions=cautions
        )

    def _cautions(self, rows: Matrix, columns: Matrix, table: StepTable) -> tuple[str, ...]:
        told = []
        samples = [table.samples[row] for row in np.flatnonzero(rows > WARNED_SAMPLE)]
        features = [table.features[column] for column in np.flatnonzero(columns > WARNED_FEATURE)]
        if samples:
            told.append(
                f"more than {percent(WARNED_SAMPLE)} of the values filled in, not measured, in {some(samples)}"
            )
        if features:
            told.append(
                f"{len(features):,} features have more than {percent(WARNED_FEATURE)} of their values filled in: "
                f"{some(features)}"
            )
        return tuple(told)

    def _sentence(self, gaps: Mask, drawn: int) -> str:
        total = int(gaps.sum())
        start = f"{total:,} gaps ({percent(total / gaps.size)} of the values) filled: "
        rest = f"{total - drawn:,} with the mean of the {self.donors.k} most similar samples that have the feature"
        if not self.settings.censored:
            return start + rest
        low, high = self.censoring.low_rate, self.censoring.high_rate
        rates = (
            f"missing: {percent(low)} in the weakest third of the features, {percent(high)} in the strongest"
        )
        if not self.censoring.evident:
            return f"{start}{rest}; nothing shows that gaps stand for small amounts ({rates})"
        features = int(self.censoring.censored.sum())
        return (
            f"{start}{drawn:,} in {features:,} weak features drawn from under the detection limit, as gaps grow rarer "
            f"with abundance ({rates}); {rest}"
        )
