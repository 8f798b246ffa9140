"""Gaps: left-censored ones filled from the low tail, the rest from similar training samples."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from workbench.intake.faults import counted
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


def low_gaps(choice: Literal["evidence", "draws", "neighbours"]) -> FillGaps:
    """Return the step for values that may lie under a detection limit, as the settings choose."""
    return FillGaps(censored=choice != "neighbours", settable=True, drawn=choice == "draws")


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
    drawn : bool
        Draw left-censored values at random. Otherwise a gap of a censored feature becomes the value to be expected
        there: with the chance c that it is censored, c E[x | x < limit] + (1 - c) (mean of its neighbours). A draw
        keeps the spread of the feature; its noise weakens every correlation of the feature.
    """

    censored: bool
    settable: bool = False
    drawn: bool = False
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
            f"the detection limit{self.how}; every other {neighbours}"
        )

    @property
    def how(self) -> str:
        """What a gap of a censored feature becomes, after the words that say which gaps these are."""
        if self.drawn:
            return " and drawn at random from there"
        return " as far as the limit explains it: it becomes the value to be expected"

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
        filled = self.donors.estimates(table.values, gaps, table.samples)
        here, chances = gaps[:, columns], self.tails.censored_chances(table.scale)
        low, share = self._low_values(table, columns, chances)
        filled[:, columns] = np.where(
            here, share * low + (1.0 - share) * filled[:, columns], filled[:, columns]
        )
        account = self._account(gaps, float(share[here].sum()), table)
        return replace(table, values=filled, imputed=table.imputed | gaps), account

    def _low_values(
        self, table: StepTable, columns: NDArray[np.intp], chances: Matrix
    ) -> tuple[Matrix, Matrix]:
        """Return the cells' values under the limit, and how far a gap there is one: its chance, or 0 or 1 by lot."""
        if not self.settings.drawn or not columns.size:
            return self.tails.expected(table.scale), chances
        names = [table.features[column] for column in columns]
        lots = uniform_table(self.seed, table.samples, names, "censored or random")
        quantiles = uniform_table(self.seed, table.samples, names, "low tail")
        return self.tails.draw(quantiles, table.scale), (lots < chances).astype(np.float64)

    def _account(self, gaps: Mask, below: float, table: StepTable) -> StepAccount:
        total = int(gaps.sum())
        rows, columns = gaps.mean(axis=1), gaps.mean(axis=0)
        numbers: dict[str, float | int | str] = {
            "gaps": total,
            "values": gaps.size,
            "from_under_the_limit": round(below),
            "from_similar_samples": total - round(below),
            "similar_samples_each": self.donors.k,
            "largest_share_filled_of_a_sample": float(rows.max()),
            "largest_share_filled_of_a_feature": float(columns.max()),
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
        sentence = self._sentence(gaps, below)
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
                f"more than {percent(WARNED_FEATURE)} of the values of {counted(len(features), 'feature')} filled in: "
                f"{some(features)}"
            )
        return tuple(told)

    def _sentence(self, gaps: Mask, below: float) -> str:
        total = int(gaps.sum())
        start = f"{counted(total, 'gap')} ({percent(total / gaps.size)} of the values) filled: "
        low_gaps = round(below)
        rest = f"{total - low_gaps:,} with the mean of the {self.donors.k} most similar samples that have the feature"
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
            f"{start}{low_gaps:,} in {features:,} weak features taken for values under the detection limit, as gaps "
            f"grow rarer with abundance ({rates}); {rest}"
        )
