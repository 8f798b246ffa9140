"""Skewed readings on request: logarithms, or normal scores of ranks.

A reading with a long tail has its correlations made by the few samples in the tail.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Literal

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri
from scipy.stats import rankdata

from workbench.intake.faults import counted
from workbench.prepare.refusal import PrepareRefusal
from workbench.prepare.steps import FitContext, Settled, Step
from workbench.prepare.tables import Matrix, StepAccount, StepTable, some
from workbench.settings.prepare_schema import ContinuousPreparation, MixedPreparation

SKEWED = 1.0
BLOM = 3.0 / 8.0
BLOM_1958 = "Blom 1958, Statistical Estimates and Transformed Beta-Variables"


def transform_steps(settings: ContinuousPreparation | MixedPreparation) -> tuple[Step, ...]:
    """Return the step that the settings ask for; none when readings stay as delivered."""
    if settings.transform == "none":
        return ()
    return (Transform(settings.transform, settings.transform_features),)


def skewness(values: Matrix) -> Matrix:
    """Return each column's third standardised moment, missing values aside; 0 for constants.

    >>> skewness(np.array([[0.0, 1.0], [0.0, 2.0], [3.0, 3.0]])).round(4).tolist()
    [0.7071, 0.0]
    """
    seen = ~np.isnan(values)
    count = np.maximum(seen.sum(axis=0), 1)
    centred = np.where(seen, values - np.where(seen, values, 0.0).sum(axis=0) / count, 0.0)
    second, third = (centred**2).sum(axis=0) / count, (centred**3).sum(axis=0) / count
    skew: Matrix = np.divide(third, second**1.5, where=second > 0, out=np.zeros_like(third))
    return skew


@dataclass(frozen=True)
class Transform(Settled):
    """Takes log2 or normal scores of some numeric features.

    Parameters
    ----------
    how : {"log", "rank"}
    features : "all", "skewed" or tuple of str
        ``skewed``: those with a skewness over 1 in the training samples (for ``log`` also positive throughout).
    """

    how: Literal["log", "rank"]
    features: Literal["all", "skewed"] | tuple[str, ...] = "all"
    step: str = "transform"
    why: ClassVar[str] = "of a skewed reading, a few large values would carry every correlation"
    keys: ClassVar[tuple[str, ...]] = ("transform", "transform_features")

    @property
    def paper(self) -> str:  # type: ignore[override]
        """Where normal scores come from; nothing for the logarithm."""
        return BLOM_1958 if self.how == "rank" else ""

    @property
    def rule(self) -> str:
        """What the step does, in one line."""
        which = self.features if isinstance(self.features, str) else f"{len(self.features)} named"
        return f"takes {'log2' if self.how == 'log' else 'normal scores of the ranks'} of {which} numeric features"

    def fit(self, table: StepTable, context: FitContext) -> FittedTransform:  # noqa: ARG002
        """Return the step with the features and, for ranks, the values of the training samples.

        Raises
        ------
        PrepareRefusal
            When a named feature is not there or is text, or a logarithm of zero or less would be taken.
        """
        columns = self._columns(table)
        if self.how == "log":
            self._check_positive(table, columns)
        names = tuple(table.features[column] for column in columns)
        known = tuple(
            _sorted(table.values[:, column]) if self.how == "rank" else np.empty(0) for column in columns
        )
        return FittedTransform(self, names, known)

    def _columns(self, table: StepTable) -> NDArray[np.intp]:
        numeric = np.array([levels is None for levels in table.levels], dtype=bool)
        if isinstance(self.features, tuple):
            return self._named(table, numeric)
        if self.features == "all":
            return np.flatnonzero(numeric)
        values = np.where(numeric, table.values, 0.0)
        skewed = numeric & (np.abs(skewness(values)) > SKEWED)
        if self.how == "log":
            skewed &= np.fmin.reduce(values, axis=0) > 0
        return np.flatnonzero(skewed)

    def _named(self, table: StepTable, numeric: NDArray[np.bool_]) -> NDArray[np.intp]:
        place = {name: column for column, name in enumerate(table.features)}
        text = [name for name in self.features if name in place and not numeric[place[name]]]
        if text:
            raise PrepareRefusal(
                f"`transform_features` names features of text: {some(text)}; only numbers are transformed",
                key="prepare.transform_features",
            )
        return np.array([place[name] for name in self.features if name in place], dtype=np.intp)

    def _check_positive(self, table: StepTable, columns: NDArray[np.intp]) -> None:
        low = np.fmin.reduce(table.values[:, columns], axis=0)
        wrong = [table.features[column] for column, least in zip(columns, low, strict=True) if least <= 0]
        if wrong:
            raise PrepareRefusal(
                f"log of zero or less in {counted(len(wrong), 'feature')}: {some(wrong)}",
                key="prepare.transform",
                fitting=("rank",),
                advice="name the features to transform in `transform_features`",
            )


def _sorted(values: Matrix) -> Matrix:
    return np.sort(values[~np.isnan(values)])


@dataclass(frozen=True)
class FittedTransform:
    """The features to transform and, for ranks, their training values in order."""

    settings: Transform
    names: tuple[str, ...]
    known: tuple[Matrix, ...]

    def transform(self, table: StepTable) -> tuple[StepTable, StepAccount]:
        """Return the table with these features transformed; the log of a new value of zero or less is missing."""
        place = {name: column for column, name in enumerate(table.features)}
        columns = [place[name] for name in self.names]
        values = table.values.copy()
        lost = 0
        if self.settings.how == "log":
            part = values[:, columns]
            positive = part > 0
            lost = int((part <= 0).sum())
            values[:, columns] = np.log2(part, where=positive, out=np.full(part.shape, np.nan))
        else:
            for column, known in zip(columns, self.known, strict=True):
                values[:, column] = normal_scores(values[:, column], known)
        return table.with_values(values), self._account(len(table.features), lost)

    def _account(self, p: int, lost: int) -> StepAccount:
        what = "log2" if self.settings.how == "log" else "normal scores of the ranks"
        sentence = f"{what} of {len(self.names)} of {p} features ({some(self.names) or 'none'})"
        if lost:
            sentence += f"; missing as they are zero or less: {counted(lost, 'value')}"
        numbers: dict[str, float | int | str] = {"features": len(self.names), "not_positive": lost}
        return StepAccount(self.settings.step, sentence, numbers, reference=self.settings.paper)


def normal_scores(values: Matrix, known: Matrix) -> Matrix:
    """Return the normal score of each value's rank among known ones.

        score = Phi^-1((rank - 3/8) / (m + 1/4))

    with the mean rank of ties; a value between two known ones has a rank between theirs, one beyond them that of
    the outermost.

    Parameters
    ----------
    values : ndarray of shape (n,)
        NaN stays.
    known : ndarray of shape (m,)
        Training values, rising; at least one.

    References
    ----------
    Blom 1958, Statistical Estimates and Transformed Beta-Variables (Wiley).

    Examples
    --------
    >>> normal_scores(np.array([1.0, 7.0, 100.0]), np.array([1.0, 7.0, 100.0])).round(4).tolist()
    [-0.8694, 0.0, 0.8694]
    """
    different, places = np.unique(known, return_index=True)
    ranks = np.interp(values, different, rankdata(known)[places])
    scores: Matrix = ndtri((ranks - BLOM) / (len(known) + 0.25))
    return np.where(np.isnan(values), np.nan, scores)
