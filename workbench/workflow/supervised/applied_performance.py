"""Predictions of another project's samples as a table, and their figures where the outcome is known there."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import MultiblockDiscriminant, MultiblockPLS, NumberOutcome, fit_residuals
from workbench.engine.supervised.performance_measures import class_performance
from workbench.intake.faults import counted
from workbench.workflow.supervised.supervised_outcome import SupervisedStudy

FloatArray = NDArray[np.float64]

NORMAL = 1.959964
FEWEST = 3


def class_figures(
    study: SupervisedStudy,
    model: MultiblockDiscriminant,
    x: FloatArray,
    names: tuple[str, ...],
    truth: FloatArray,
) -> tuple[pd.DataFrame, pd.DataFrame | None, list[str]]:
    """Return predicted classes with their probabilities, their figures with 95 % intervals, and both in words.

    Parameters
    ----------
    study : SupervisedStudy
    model : MultiblockDiscriminant
    x : ndarray of shape (n_there, n_features)
        Standardised as the model was taught.
    names : tuple of str
    truth : ndarray of shape (n_there,)
        Class from 0; NaN where it is not known. Fewer than three of a class: no figures.
    """
    shares, chosen = model.predict_proba(x), np.asarray(model.predict(x), dtype=np.intp)
    table = pd.DataFrame({"sample": names, "predicted": [study.levels[g] for g in chosen]})
    for g, level in enumerate(study.levels):
        table[f"probability {level}"] = shares[:, g]
    known = np.isfinite(truth)
    table[study.name] = [study.levels[int(t)] if k else "" for t, k in zip(truth, known, strict=True)]
    labels = truth[known].astype(np.intp)
    counts = np.bincount(labels, minlength=len(study.levels))
    if counts.min() < FEWEST:
        least = counted(int(counts.min()), "sample")
        return table, None, [f"no figures: a class has {least} there, {FEWEST} are the least"]
    scores = np.asarray(model.decision_function(x)).reshape(len(x), -1)[known]
    figures = class_performance(labels, scores[None], chosen[known][None], shares[known][None])
    recognised = np.diag(figures.confusion) / counts
    # A share of 0 or 1 is not known for certain: Agresti & Coull's two added of each kind.
    smoothed = (np.diag(figures.confusion) + 2.0) / (counts + 4.0)
    error = float(np.sqrt((smoothed * (1.0 - smoothed) / (counts + 4.0)).sum()) / counts.size)
    rows = [
        ("balanced_accuracy", recognised.mean(), *_interval(float(recognised.mean()), error)),
        ("auc", figures.auc[0], *_interval(float(figures.auc[0]), figures.auc_error)),
        ("brier", figures.brier[0], np.nan, np.nan),
        *(
            (f"recognised {level}", r, np.nan, np.nan)
            for level, r in zip(study.levels, recognised, strict=True)
        ),
    ]
    performance = pd.DataFrame(rows, columns=["measure", "value", "low", "high"]).assign(n=labels.size)
    first, second = rows[0], rows[1]
    said = (
        f"there, on {counted(labels.size, 'sample')}: balanced accuracy {first[1]:.2f} (95 % {first[2]:.2f} to "
        f"{first[3]:.2f}), AUC {second[1]:.2f} ({second[2]:.2f} to {second[3]:.2f})"
    )
    return table, performance, [said]


def predicted_numbers(
    study: SupervisedStudy,
    model: MultiblockPLS | MultiblockDiscriminant,
    x: FloatArray,
    nuisance: FloatArray | None,
) -> FloatArray:
    """Return predicted numbers in their unit: what the nuisance says by the regression here, and the model."""
    assert isinstance(study.outcome, NumberOutcome)
    predicted = np.asarray(model.predict(x)).reshape(len(x), -1)
    own = study.units.nuisance if study.units.nuisance.size else None
    learnt = fit_residuals(own, study.outcome.values[:, :, 0])
    of_nuisance = -learnt.transform(nuisance if own is not None else None, np.zeros_like(predicted))
    total: FloatArray = (predicted + of_nuisance)[:, 0] * study.deviations[0] + study.means[0]
    return total


def number_figures(
    study: SupervisedStudy, predicted: FloatArray, names: tuple[str, ...], truth: FloatArray
) -> tuple[pd.DataFrame, pd.DataFrame | None, list[str]]:
    """Return predicted numbers, their figures in the unit of the outcome, and both in words.

    Parameters
    ----------
    study : SupervisedStudy
    predicted, truth : ndarray of shape (n_there,)
        ``truth`` is NaN where it is not known.
    names : tuple of str
    """
    table = pd.DataFrame({"sample": names, "predicted": predicted, study.name: truth})
    known = np.isfinite(truth)
    n = int(known.sum())
    if n < FEWEST + 1 or truth[known].std() == 0.0:
        return (
            table,
            None,
            [f"no figures: {counted(n, 'sample')} with a known outcome there, or it does not vary"],
        )
    errors = truth[known] - predicted[known]
    r = float(np.corrcoef(truth[known], predicted[known])[0, 1]) if predicted[known].std() > 0.0 else 0.0
    low, high = np.tanh(
        np.arctanh(np.clip(r, -0.999999, 0.999999)) + np.array([-1.0, 1.0]) * NORMAL / np.sqrt(n - 3)
    )
    share = 1.0 - float((errors**2).sum() / ((truth[known] - truth[known].mean()) ** 2).sum())
    rows = [
        ("q2", share, np.nan, np.nan),
        ("correlation", r, low, high),
        ("rmse (units of the outcome)", float(np.sqrt((errors**2).mean())), np.nan, np.nan),
        ("mean absolute error", float(np.abs(errors).mean()), np.nan, np.nan),
        (
            "bias (observed less predicted)",
            float(errors.mean()),
            *_interval(float(errors.mean()), float(errors.std(ddof=1) / np.sqrt(n)), None),
        ),
    ]
    performance = pd.DataFrame(rows, columns=["measure", "value", "low", "high"]).assign(n=n)
    said = (
        f"there, on {counted(n, 'sample')}: correlation with the truth {r:.2f} (95 % {low:.2f} to {high:.2f}), Q2 "
        f"{share:.2f}, mean absolute error {np.abs(errors).mean():.3g}, bias {errors.mean():+.3g} (observed less "
        "predicted)"
    )
    return table, performance, [said]


def _interval(value: float, error: float, most: float | None = 1.0) -> tuple[float, float]:
    low, high = value - NORMAL * error, value + NORMAL * error
    return (low, high) if most is None else (max(0.0, low), min(most, high))
