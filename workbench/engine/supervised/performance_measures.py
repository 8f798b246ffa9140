"""How good predictions of samples that were held out are: numbers and classes, repeat by repeat."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.supervised.double_choice import ranking_losses

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

CALIBRATION_BINS = 5


@dataclass(frozen=True, eq=False)
class NumberPerformance:
    """Out-of-sample figures of numeric outcomes, one for each repeat.

    Attributes
    ----------
    q2 : ndarray of shape (repeats,)
        ``1 - sum (y - yhat)^2 / sum (y - mean)^2``, means of the training parts, nuisance included in ``yhat``;
        several outcomes, each of unit variance, are added up.
    q2_added : ndarray of shape (repeats,)
        The same against the nuisance's own predictions: what the blocks add.
    correlation : ndarray of shape (repeats,)
        Of predicted and true values, mean over the outcomes.
    rmse : ndarray of shape (repeats,)
        Root mean squared error in standard deviations of the outcome.
    """

    q2: FloatArray
    q2_added: FloatArray
    correlation: FloatArray
    rmse: FloatArray


def number_performance(
    truth: FloatArray, predicted: FloatArray, mean: FloatArray, nuisance: FloatArray
) -> NumberPerformance:
    """Return the figures of predictions.

    Parameters
    ----------
    truth : ndarray of shape (n_samples, n_outcomes)
        Scaled to unit variance.
    predicted, mean, nuisance : ndarray of shape (repeats, n_samples, n_outcomes)
        Predictions by the model, by the training mean, and by the nuisance; NaN where not scored.

    Examples
    --------
    >>> y = np.array([[-1.0], [1.0]])
    >>> number_performance(y, 0.5 * y[None], np.zeros((1, 2, 1)), np.zeros((1, 2, 1))).q2
    array([0.75])
    """
    scored = np.isfinite(predicted)
    errors, from_mean, from_nuisance = (
        np.where(scored, (truth - values) ** 2, 0.0).sum(axis=(1, 2))
        for values in (predicted, mean, nuisance)
    )
    return NumberPerformance(
        q2=1.0 - errors / from_mean,
        q2_added=1.0 - errors / from_nuisance,
        correlation=np.array([_mean_correlation(truth, values) for values in predicted]),
        rmse=np.sqrt(errors / scored.sum(axis=(1, 2))),
    )


@dataclass(frozen=True, eq=False)
class ClassPerformance:
    """Out-of-sample figures of classes, one for each repeat.

    Attributes
    ----------
    balanced_accuracy : ndarray of shape (repeats,)
        Mean over the classes of the share that is recognised.
    auc : ndarray of shape (repeats,)
        Area under the ROC curve; of more than two classes the mean over each against the rest.
    auc_error : float
        Standard error of the mean AUC over the repeats (DeLong et al. 1988, from each sample's mean placement),
        at least that of half a sample of the smallest class: an area of 1 is not known for certain.
    brier : ndarray of shape (repeats,)
        Mean squared distance of the probabilities from the truth, each class counting alike; ``1 - 1/G`` is
        what knowing nothing gives.
    confusion : ndarray of shape (n_classes, n_classes)
        Samples of the class of the row predicted as the class of the column, mean over the repeats.
    calibration : ndarray of shape (n_bins, 3)
        Mean predicted probability, share observed (each class counting alike), samples a repeat; two classes:
        of the second, else of each class.
    """

    balanced_accuracy: FloatArray
    auc: FloatArray
    auc_error: float
    brier: FloatArray
    confusion: FloatArray
    calibration: FloatArray


def class_performance(
    labels: IndexArray, scores: FloatArray, predicted: IndexArray, probabilities: FloatArray
) -> ClassPerformance:
    """Return the figures of predictions.

    Parameters
    ----------
    labels : ndarray of int, shape (n_samples,)
    scores : ndarray of shape (repeats, n_samples, 1 or n_classes)
        NaN where not scored.
    predicted : ndarray of int, shape (repeats, n_samples)
        Class, -1 where not scored.
    probabilities : ndarray of shape (repeats, n_samples, n_classes)

    References
    ----------
    DeLong, DeLong & Clarke-Pearson 1988, Biometrics 44:837. Brier 1950, Monthly Weather Review 78:1.

    Examples
    --------
    >>> labels = np.array([0, 0, 1, 1])
    >>> sure = np.array([[[0.9, 0.1], [0.6, 0.4], [0.7, 0.3], [0.2, 0.8]]])
    >>> found = class_performance(labels, sure[:, :, 1:], np.array([[0, 0, 0, 1]]), sure)
    >>> found.balanced_accuracy, found.auc, found.confusion.tolist()
    (array([0.75]), array([0.75]), [[2.0, 0.0], [1.0, 1.0]])
    """
    n_classes = probabilities.shape[2]
    scored = predicted >= 0
    truth = labels[:, None] == np.arange(n_classes)
    placements = np.full(scores.shape[:2], np.nan)
    for repeat, inside in enumerate(scored):
        placements[repeat, inside] = _placements(labels[inside], scores[repeat, inside], n_classes)
    distance = np.where(scored, ((probabilities - truth) ** 2).sum(axis=2), np.nan)
    hits = np.where(scored, predicted == labels, np.nan)
    return ClassPerformance(
        balanced_accuracy=_by_class(hits, labels, n_classes),
        auc=1.0 - _by_class(placements, labels, n_classes),
        auc_error=_delong(placements, labels, n_classes),
        brier=_by_class(distance, labels, n_classes),
        confusion=_confusion(labels, predicted, n_classes),
        calibration=_calibration(labels, probabilities, scored),
    )


def roc_curve(labels: IndexArray, scores: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the share of class 0 and of class 1 at or above each score, both from 0 to 1.

    Parameters
    ----------
    labels : ndarray of int, shape (n_samples,)
        0 or 1.
    scores : ndarray of shape (n_samples,)

    Examples
    --------
    >>> roc_curve(np.array([0, 1, 1]), np.array([0.1, 0.2, 0.9]))
    (array([0., 0., 0., 1.]), array([0. , 0.5, 1. , 1. ]))
    """
    order = np.argsort(-scores, kind="stable")
    ends = np.append(np.flatnonzero(np.diff(scores[order]) != 0.0), labels.size - 1)
    rises = [np.cumsum(labels[order] == g)[ends] / max(np.count_nonzero(labels == g), 1) for g in (0, 1)]
    false, true = (np.concatenate([[0.0], rise]) for rise in rises)
    return false, true


def _placements(labels: IndexArray, scores: FloatArray, n_classes: int) -> FloatArray:
    if n_classes == 2:
        return ranking_losses(scores, labels[:, None] == 1)[:, 0]
    every = [ranking_losses(scores[:, [g]], labels[:, None] == g)[:, 0] for g in range(n_classes)]
    return np.asarray(np.mean(every, axis=0))


def _by_class(values: FloatArray, labels: IndexArray, n_classes: int) -> FloatArray:
    """Mean over the classes of the mean over a class's scored samples, for each repeat."""
    means = [np.nanmean(values[:, labels == g], axis=1) for g in range(n_classes)]
    return np.asarray(np.mean(means, axis=0))


def _delong(placements: FloatArray, labels: IndexArray, n_classes: int) -> float:
    held = np.isfinite(placements).any(axis=0)
    mean = np.nanmean(placements[:, held], axis=0)
    parts = [mean[labels[held] == g] for g in range(n_classes)]
    variances = [part.var(ddof=1) / part.size if part.size > 1 else np.nan for part in parts]
    # With two classes both means of the placements are the same area, estimated from either side.
    scale = 1.0 if n_classes == 2 else 1.0 / n_classes
    least = 0.5 / min(part.size for part in parts)
    return float(max(np.sqrt(np.sum(variances)) * scale, least))


def _confusion(labels: IndexArray, predicted: IndexArray, n_classes: int) -> FloatArray:
    table = np.zeros((n_classes, n_classes))
    for row in predicted:
        np.add.at(table, (labels[row >= 0], row[row >= 0]), 1.0)
    return table / len(predicted)


def _calibration(labels: IndexArray, probabilities: FloatArray, scored: NDArray[np.bool_]) -> FloatArray:
    n_classes = probabilities.shape[2]
    weight = (1.0 / np.bincount(labels, minlength=n_classes))[labels]
    first = 1 if n_classes == 2 else 0
    said = probabilities[:, :, first:][scored].ravel()
    true = np.broadcast_to(
        (labels[:, None] == np.arange(first, n_classes))[None], probabilities[:, :, first:].shape
    )
    weights = np.broadcast_to(weight[None, :, None], true.shape)[scored].ravel()
    bins = np.minimum((said * CALIBRATION_BINS).astype(int), CALIBRATION_BINS - 1)
    rows = [
        (
            np.average(said[inside], weights=weights[inside]),
            np.average(true[scored].ravel()[inside], weights=weights[inside]),
            np.count_nonzero(inside) / len(scored),
        )
        for inside in (bins == b for b in range(CALIBRATION_BINS))
        if inside.any()
    ]
    return np.array(rows)


def _mean_correlation(truth: FloatArray, predicted: FloatArray) -> float:
    scored = np.isfinite(predicted).all(axis=1)
    a, b = truth[scored] - truth[scored].mean(axis=0), predicted[scored] - predicted[scored].mean(axis=0)
    lengths = np.linalg.norm(a, axis=0) * np.linalg.norm(b, axis=0)
    each = np.divide((a * b).sum(axis=0), lengths, out=np.zeros(lengths.shape), where=lengths > 0.0)
    return float(each.mean())
