"""Quotient normalisation: each sample's dilution, from the quotients of its values to a reference profile.

It assumes that most features do not change between samples, so that the typical quotient of a sample's
intensities to a reference is its dilution (Dieterle, Ross, Schlotterbeck & Senn 2006, Analytical Chemistry
78:4281-4290).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from workbench.prepare.guards import Usual
from workbench.prepare.steps import (
    ENOUGH_REFERENCE,
    FEWEST_FOR_SCALE,
    FitContext,
    Settled,
    check_found,
    extremes,
    median_rows,
    reference_features,
)
from workbench.prepare.tables import Mask, Matrix, StepAccount, StepTable, bounded_quotients

DIETERLE = "Dieterle et al. 2006, Analytical Chemistry 78:4281"


def reference_profile(intensities: Matrix) -> Matrix:
    """Return the reference: the median over samples after each is brought to the same total.

    Totals are sums over the features that the sample has, medians over what is above zero; the profile is on the
    scale of the sample with the median total.
    """
    totals = np.nansum(intensities, axis=1, keepdims=True)
    usable = totals[:, 0] > 0
    shares = intensities[usable] / totals[usable]
    return median_rows(shares.T, shares.T > 0) * float(np.median(totals[usable]))


def median_quotients(intensities: Matrix, reference: Matrix) -> Matrix:
    """Return each sample's dilution: the median quotient to the reference over what the sample has.

    Parameters
    ----------
    intensities : ndarray of shape (n_samples, n_features)
        Zero and NaN take no part.
    reference : ndarray of shape (n_features,)
        From :func:`reference_profile` of the training samples.

    Returns
    -------
    ndarray of shape (n_samples,)
        NaN for a sample that has none of the features.

    References
    ----------
    Dieterle et al. 2006, Analytical Chemistry 78:4281-4290.

    Examples
    --------
    One feature of the second sample is up tenfold; its dilution, a half, is found all the same:

    >>> profile = np.array([4.0, 8.0, 2.0, 6.0, 1.0])
    >>> median_quotients(np.vstack([profile, profile * [0.5, 0.5, 5.0, 0.5, 0.5]]), profile).tolist()
    [1.0, 0.5]
    """
    quotients = bounded_quotients(intensities, reference)
    return median_rows(quotients, quotients > 0)


@dataclass(frozen=True)
class Quotients(Settled):
    """Divides each sample by its dilution, found by quotients to a reference.

    The reference holds the features seen in the most training samples: those seen in all of them
    when there are ``enough`` of these, else the ``enough`` most seen. Fewer than ``fewest`` features:
    no normalisation, and the account says so.
    """

    enough: int = ENOUGH_REFERENCE
    fewest: int = FEWEST_FOR_SCALE
    step: str = "quotient normalisation"
    rule: str = (
        "divides each sample by how concentrated it is: the median over features of its value against the typical "
        "sample's (the quotient to a reference profile)"
    )
    why: ClassVar[str] = (
        "samples are diluted unequally; a median over features is not moved by the few that truly change"
    )
    paper: ClassVar[str] = DIETERLE
    keys: ClassVar[tuple[str, ...]] = ("normalisation",)

    def fit(self, table: StepTable, context: FitContext) -> FittedQuotients:  # noqa: ARG002
        """Return the step with its reference."""
        seen = (table.values > 0).sum(axis=0)
        used, cut = reference_features(seen, self.enough, self.fewest)
        reference = reference_profile(table.values[:, used]) if used.any() else np.empty(0)
        usual = Usual(0.0, np.inf)
        fitted = FittedQuotients(self, used, reference, cut, len(table.samples), table.row_word, usual)
        return replace(fitted, usual=Usual.of(np.log2(fitted.factors(table))))


@dataclass(frozen=True)
class FittedQuotients:
    """Dilutions against the training reference."""

    settings: Quotients
    used: Mask
    reference: Matrix
    cut: int
    n_training: int
    row_word: str
    usual: Usual

    def factors(self, table: StepTable) -> Matrix:
        """Return the dilution of each sample, 1 where there is no reference.

        Raises
        ------
        InputError
            When a sample has none of the features of the reference.
        """
        if not self.used.any():
            return np.ones(len(table.samples))
        factors = median_quotients(table.values[:, self.used], self.reference)
        return check_found("dilution", factors, table, int(self.used.sum()))

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return values divided by dilutions."""
        factors = self.factors(table)
        return table.divided(factors), self._account(factors, table.samples)

    def _account(self, factors: Matrix, samples: tuple[str, ...]) -> StepAccount:
        used = int(self.used.sum())
        numbers: dict[str, float | int | str] = {"reference_features": used, "reference_seen_in": self.cut}
        numbers |= extremes("concentration", factors, samples)
        if used:
            sentence = (
                f"concentrations read off {used:,} features that at least {self.cut} of {self.n_training} "
                f"{self.row_word} have"
            )
        else:
            sentence = f"not scaled: fewer than {self.settings.fewest} features; values taken as they are"
        cautions = self.usual.cautions("concentration", np.log2(factors), samples)
        return StepAccount(self.settings.step, sentence, numbers, reference=DIETERLE, cautions=cautions)
