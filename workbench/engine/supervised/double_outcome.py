"""The outcome of a supervised method, as delivered and in every arrangement of a permutation test."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workbench.engine.nuisance import Nuisance, fit_residuals
from workbench.engine.supervised.double_choice import fewest_as_good, ranking_losses
from workbench.engine.supervised.outcome_coding import balanced_codes
from workbench.errors import NumericsError

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class HeldOut:
    """Predictions of samples that a model has not seen.

    Attributes
    ----------
    train, rows : ndarray of int
        Rows that taught the model, and rows that it predicted.
    predicted : ndarray of shape (n_candidates, n_rows, columns, size)
        By each candidate, for each arrangement of the outcome.
    """

    train: IndexArray
    rows: IndexArray
    predicted: FloatArray


class Outcome(ABC):
    """An outcome in several arrangements, the first as delivered."""

    @property
    @abstractmethod
    def size(self) -> int:
        """Number of arrangements."""

    @property
    @abstractmethod
    def delivered(self) -> NDArray[Any]:
        """The outcome as delivered, samples first."""

    @property
    @abstractmethod
    def columns(self) -> int:
        """Number of columns of a prediction."""

    @abstractmethod
    def arranged(self, arrangements: IndexArray) -> Outcome:
        """Return the outcome as delivered and in further arrangements of rows, shape (n_arrangements, n_samples)."""

    @abstractmethod
    def part(self, arrangements: slice) -> Outcome:
        """Return some of the arrangements."""

    @abstractmethod
    def codes(self, train: IndexArray) -> FloatArray:
        """Centred outcome of training rows, shape (n_train, columns, size)."""

    @abstractmethod
    def losses(self, parts: Sequence[HeldOut]) -> FloatArray:
        """Loss of each sample held out, shape (n_candidates, n_rows of all parts, size)."""

    @abstractmethod
    def weights(self, rows: IndexArray) -> FloatArray:
        """Weight of each sample's loss, adding up to 1, shape (n_rows, size)."""

    @abstractmethod
    def level(self, rows: IndexArray, predicted: FloatArray) -> FloatArray:
        """Return what to take from predictions so that those of different folds compare, shape (columns, size).

        Parameters
        ----------
        rows : ndarray of int
        predicted : ndarray of shape (n_rows, columns, size)
            Of samples held out.
        """

    @abstractmethod
    def statistic(self, parts: Sequence[HeldOut]) -> FloatArray:
        """How well all samples held out are predicted by the one candidate given, shape (size,); large is good."""

    def mean_losses(self, repeats: Sequence[Sequence[HeldOut]]) -> tuple[IndexArray, FloatArray]:
        """Rows held out, in order, and the mean of each one's losses over the repeats that held it out.

        Returns
        -------
        rows : ndarray of int
        losses : ndarray of shape (n_candidates, n_rows, size)
        """
        rows = np.unique(np.concatenate([part.rows for parts in repeats for part in parts]))
        candidates = len(repeats[0][0].predicted)
        total, seen = np.zeros((candidates, rows.size, self.size)), np.zeros(rows.size)
        for parts in repeats:
            places = np.searchsorted(rows, np.concatenate([part.rows for part in parts]))
            total[:, places] += self.losses(parts)
            seen[places] += 1.0
        return rows, total / seen[:, None]

    def choose(self, repeats: Sequence[Sequence[HeldOut]]) -> IndexArray:
        """Candidate of each arrangement, shape (size,): the first that is as good as the best."""
        rows, losses = self.mean_losses(repeats)
        return fewest_as_good(losses, self.weights(rows))


@dataclass(frozen=True, eq=False)
class ClassOutcome(Outcome):
    """Classes from 0.

    Attributes
    ----------
    labels : ndarray of int, shape (n_samples, size)
    n_classes : int

    Examples
    --------
    >>> ClassOutcome.of(np.array([0, 1, 1])).codes(np.arange(3)).ravel()
    array([-1.5 ,  0.75,  0.75])
    """

    labels: IndexArray
    n_classes: int

    @classmethod
    def of(cls, labels: IndexArray) -> ClassOutcome:
        """Outcome of one class for each sample.

        Raises
        ------
        NumericsError
            When there are fewer than two classes, or a code that no sample has.
        """
        labels = np.asarray(labels, dtype=np.intp)
        n_classes = int(labels.max(initial=-1)) + 1
        if n_classes < 2 or labels.min() < 0 or np.bincount(labels, minlength=n_classes).min() == 0:
            raise NumericsError(
                f"{n_classes} classes, or one of them without samples; give codes from 0, two at least, each used"
            )
        return cls(labels[:, None], n_classes)

    @property
    def size(self) -> int:
        """Number of arrangements."""
        return int(self.labels.shape[1])

    @property
    def delivered(self) -> NDArray[Any]:
        """Class of each sample."""
        return self.labels[:, 0]

    @property
    def columns(self) -> int:
        """One for two classes, else one for each class."""
        return 1 if self.n_classes == 2 else self.n_classes

    def arranged(self, arrangements: IndexArray) -> ClassOutcome:
        """Return the classes as delivered and rearranged."""
        first = self.labels[:, 0]
        return ClassOutcome(np.column_stack([first, *(first[rows] for rows in arrangements)]), self.n_classes)

    def part(self, arrangements: slice) -> ClassOutcome:
        """Return some of the arrangements."""
        return ClassOutcome(self.labels[:, arrangements], self.n_classes)

    def codes(self, train: IndexArray) -> FloatArray:
        """Balanced codes of the training rows."""
        return balanced_codes(self.labels[train], self.n_classes)

    def losses(self, parts: Sequence[HeldOut]) -> FloatArray:
        """Share of the other classes that is ranked on the wrong side, mean over the columns."""
        labels = self.labels[np.concatenate([part.rows for part in parts])]
        predicted = np.concatenate([part.predicted for part in parts], axis=1)
        if self.n_classes == 2:
            return ranking_losses(predicted[:, :, 0], labels == 1)
        every = [ranking_losses(predicted[:, :, g], labels == g) for g in range(self.n_classes)]
        return np.asarray(np.mean(every, axis=0))

    def weights(self, rows: IndexArray) -> FloatArray:
        """Each class counts alike."""
        belongs = self.labels[rows][:, None, :] == np.arange(self.n_classes)[:, None]
        counts = belongs.sum(axis=0, keepdims=True)
        shares = np.divide(belongs, counts, out=np.zeros(belongs.shape), where=counts > 0).sum(axis=1)
        weights: FloatArray = shares / shares.sum(axis=0)
        return weights

    def level(self, rows: IndexArray, predicted: FloatArray) -> FloatArray:
        """Unweighted mean of the classes' mean predictions."""
        middle: FloatArray = np.einsum("nqp,np->qp", predicted, self.weights(rows))
        return middle

    def statistic(self, parts: Sequence[HeldOut]) -> FloatArray:
        """Area under the ROC curve; of more than two classes the mean over each against the rest."""
        weights = self.weights(np.concatenate([part.rows for part in parts]))
        area: FloatArray = 1.0 - np.einsum("np,np->p", self.losses(parts)[0], weights)
        return area


@dataclass(frozen=True, eq=False)
class NumberOutcome(Outcome):
    """One numeric outcome or several, each scaled to unit variance; what the nuisance says of them is removed.

    Attributes
    ----------
    values : ndarray of shape (n_samples, columns, size)
    nuisance : ndarray of shape (n_samples, n_columns) or None
    """

    values: FloatArray
    nuisance: FloatArray | None

    @classmethod
    def of(cls, values: FloatArray, nuisance: FloatArray | None = None) -> NumberOutcome:
        """Outcome of one or several numbers for each sample.

        Raises
        ------
        NumericsError
            When an outcome does not vary, or is not finite.
        """
        values = np.asarray(values, dtype=np.float64)
        values = values[:, None] if values.ndim == 1 else values
        deviation = values.std(axis=0, ddof=1)
        if not (deviation > 0.0).all():
            raise NumericsError(
                f"outcome {int(np.argmin(deviation > 0.0))} (from 0) does not vary or is not finite; leave it out"
            )
        return cls(((values - values.mean(axis=0)) / deviation)[:, :, None], nuisance)

    @property
    def size(self) -> int:
        """Number of arrangements."""
        return int(self.values.shape[2])

    @property
    def delivered(self) -> NDArray[Any]:
        """Numbers of each sample, shape (n_samples, columns)."""
        return self.values[:, :, 0]

    @property
    def columns(self) -> int:
        """Number of outcomes."""
        return int(self.values.shape[1])

    def arranged(self, arrangements: IndexArray) -> NumberOutcome:
        """Return the outcome as delivered, and its residuals from the nuisance rearranged (Freedman & Lane 1983)."""
        first = self.values[:, :, 0]
        residual = Nuisance.of(self.nuisance, len(first)).residuals(first)
        return NumberOutcome(
            np.stack([first, *(residual[rows] for rows in arrangements)], axis=2), self.nuisance
        )

    def part(self, arrangements: slice) -> NumberOutcome:
        """Return some of the arrangements."""
        return NumberOutcome(self.values[:, :, arrangements], self.nuisance)

    def codes(self, train: IndexArray) -> FloatArray:
        """Outcome less what the nuisance says of it."""
        return self.targets(train, train)

    def targets(self, train: IndexArray, rows: IndexArray) -> FloatArray:
        """Outcome of any rows less what the training rows' nuisance regression says of it."""
        columns = self.nuisance
        taught = self.values[train].reshape(train.size, -1)
        asked = self.values[rows].reshape(rows.size, -1)
        fitted = fit_residuals(None if columns is None else columns[train], taught)
        left = fitted.transform(None if columns is None else columns[rows], asked)
        return left.reshape(rows.size, self.columns, self.size)

    def losses(self, parts: Sequence[HeldOut]) -> FloatArray:
        """Squared error, added up over the outcomes."""
        errors = [((self.targets(part.train, part.rows) - part.predicted) ** 2).sum(axis=2) for part in parts]
        return np.concatenate(errors, axis=1)

    def weights(self, rows: IndexArray) -> FloatArray:
        """All samples count alike."""
        return np.full((rows.size, self.size), 1.0 / rows.size)

    def level(self, rows: IndexArray, predicted: FloatArray) -> FloatArray:
        """Nothing: numbers compare as they are."""
        del rows
        return np.zeros(predicted.shape[1:])

    def statistic(self, parts: Sequence[HeldOut]) -> FloatArray:
        """``1 - sum of squared errors / sum of squared errors of the nuisance alone``."""
        nothing = [HeldOut(part.train, part.rows, np.zeros_like(part.predicted)) for part in parts]
        share: FloatArray = 1.0 - self.losses(parts)[0].sum(axis=0) / self.losses(nothing)[0].sum(axis=0)
        return share
