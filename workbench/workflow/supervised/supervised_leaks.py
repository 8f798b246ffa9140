"""Features that tell the outcome by themselves without a miss: a marker rarely does, the outcome itself always."""

from __future__ import annotations

from math import exp, lgamma

import numpy as np
from numpy.typing import NDArray

from workbench.engine import ClassOutcome
from workbench.engine.linear import column_correlations
from workbench.intake.faults import counted
from workbench.workflow.supervised.supervised_fit import SupervisedResult
from workbench.workflow.supervised.supervised_source import predictor_features, predictor_values

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

CLOSE = 0.99
"""Correlation with a numeric outcome from which a feature is suspected of being it."""
BY_CHANCE = 0.05
"""Features that noise may be expected to bring before nothing is said."""
NAMED = 5


def leaks(result: SupervisedResult) -> list[str]:
    """Return a warning that names the features that tell the outcome alone, or nothing.

    Classes: sorted by the feature each class stands in one piece, without ties across its borders; noise does this
    with probability ``G! prod n_g! / n!``, and where noise would bring such features nothing is said. Numbers: a
    correlation of ``CLOSE`` or more.
    """
    study, outcome = result.study, result.study.outcome
    if study.kind == "block":
        return []
    every = np.arange(study.n)
    values = np.hstack(
        [study.units.values_of(every, predictor_values(study, name)) for name in study.predictors]
    )
    names = [(feature, name) for name in study.predictors for feature in predictor_features(study, name)]
    if isinstance(outcome, ClassOutcome):
        codes = outcome.labels[:, 0]
        if values.shape[1] * chance_of_parting(np.bincount(codes)) > BY_CHANCE:
            return []
        found, what = parts_classes(values, codes), "tells the classes apart without a miss"
    else:
        r = column_correlations(
            values - values.mean(axis=0), outcome.delivered - outcome.delivered.mean(axis=0)
        )
        found, what = np.nan_to_num(np.abs(r[:, 0])) >= CLOSE, f"goes with the outcome at {CLOSE:g} or more"
    told = [f"{feature} ({block})" for (feature, block), held in zip(names, found, strict=True) if held]
    if not told:
        return []
    listed = ", ".join(told[:NAMED]) + (", ..." if len(told) > NAMED else "")
    alone = "each " if len(told) > 1 else ""
    return [
        f"{counted(len(told), 'feature')} alone {alone}{what} in all {study.n}: {listed}. A marker rarely "
        "does: ask whether it is the outcome measured again, what the outcome was made from, or a trace of how samples "
        "were handled. If so, take it out of its table; every figure here rests on it"
    ]


def chance_of_parting(counts: IndexArray) -> float:
    """Probability that noise sorts samples into one piece for each class: ``G! prod n_g! / n!``.

    Examples
    --------
    >>> chance_of_parting(np.array([3, 3]))
    0.1
    """
    logarithm = lgamma(counts.size + 1) + sum(lgamma(n + 1) for n in counts) - lgamma(counts.sum() + 1)
    return round(exp(logarithm), 12)


def parts_classes(values: FloatArray, codes: IndexArray) -> NDArray[np.bool_]:
    """Return for each feature whether sorting by it leaves every class in one piece, no ties across borders.

    Examples
    --------
    >>> parts_classes(np.array([[1.0, 1.0], [2.0, 3.0], [5.0, 2.0], [6.0, 4.0]]), np.array([0, 0, 1, 1]))
    array([ True, False])
    """
    order = np.argsort(values, axis=0, kind="stable")
    borders = np.diff(codes[order], axis=0) != 0
    steps = np.diff(np.take_along_axis(values, order, axis=0), axis=0) > 0.0
    pieces = borders.sum(axis=0) == np.unique(codes).size - 1
    return np.asarray(pieces & (steps | ~borders).all(axis=0))
