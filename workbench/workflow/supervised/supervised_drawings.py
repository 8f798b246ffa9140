"""What the figures of a supervised analysis need, from its result."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from workbench.engine import ClassOutcome, NumberOutcome
from workbench.figures.supervised_view import SupervisedView
from workbench.workflow.supervised.supervised_fit import SupervisedResult
from workbench.workflow.supervised.supervised_source import predictor_features
from workbench.workflow.supervised.supervised_tables import components_table

FloatArray = NDArray[np.float64]

DRAWN = 20


def supervised_view(result: SupervisedResult) -> SupervisedView:
    """Return the arrays that the figures show."""
    study, validation = result.study, result.validation
    fitted, held_out, truth, scores = _scores(result)
    order = np.argsort(-np.nan_to_num(result.model.vip_), kind="stable")[:DRAWN]
    named = [result.features[k] for k in order]
    frequency, in_panel = _panel(result, named)
    r2 = components_table(result)["r2"].to_numpy()
    return SupervisedView(
        outcome=study.name,
        levels=study.levels if result.classes else (),
        truth=truth,
        fitted=fitted,
        held_out=held_out,
        roc_scores=scores,
        blocks=result.blocks,
        alike=validation.alike,
        importance=result.model.block_importance_,
        measure=result.measure,
        candidates=validation.candidates,
        by_components=validation.by_components,
        in_sample=r2[np.array(validation.candidates) - 1],
        chosen=validation.components,
        names=tuple(name for _, name in named),
        name_blocks=tuple(block for block, _ in named),
        vip=np.nan_to_num(result.model.vip_)[order],
        frequency=frequency,
        in_panel=in_panel,
        observed=validation.test.observed,
        null=validation.test.null,
        p=validation.test.p,
        withheld=validation.test.withheld,
    )


def _scores(result: SupervisedResult) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Fitted and held-out scores, the truth, and the held-out scores of each repeat; empty for a block."""
    study, model = result.study, result.validation.model
    if isinstance(study.outcome, ClassOutcome):
        decision = np.asarray(result.model.decision_function(result.values)).reshape(study.n, -1)
        labels = study.outcome.labels[:, 0].astype(np.float64)
        return decision, model.predicted.mean(axis=0), labels, model.predicted
    assert isinstance(study.outcome, NumberOutcome)
    if study.kind == "block":
        none = np.zeros((0, 1))
        return none, none, np.zeros(0), model.predicted
    every = np.arange(study.n)
    truth = study.outcome.values[:, 0, 0]
    nuisance = truth - study.outcome.targets(every, every)[:, 0, 0]
    fitted = np.asarray(result.model.predict(result.values)).reshape(study.n, -1) + nuisance[:, None]
    unit, mean = study.deviations[0], study.means[0]
    return (
        fitted * unit + mean,
        model.predicted.mean(axis=0) * unit + mean,
        truth * unit + mean,
        model.predicted,
    )


def _panel(result: SupervisedResult, named: list[tuple[str, str]]) -> tuple[FloatArray, NDArray[np.bool_]]:
    if result.panel is None:
        return np.full(len(named), np.nan), np.zeros(len(named), dtype=bool)
    shares: dict[tuple[str, str], float] = {}
    chosen: set[tuple[str, str]] = set()
    for b, block in enumerate(result.study.predictors):
        features = predictor_features(result.study, block)
        shares |= {
            (block, f): share for f, share in zip(features, result.panel.every_frequency[b], strict=True)
        }
        inside = result.panel.feature[result.panel.block == b]
        chosen |= {(block, features[j]) for j in inside}
    return np.array([shares[name] for name in named]), np.array([name in chosen for name in named])
