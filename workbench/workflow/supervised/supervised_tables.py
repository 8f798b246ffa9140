"""Tables of a supervised analysis: every in-sample figure stands beside its held-out one."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import ClassPerformance, NumberPerformance
from workbench.workflow.supervised.supervised_fit import SupervisedResult, fitted_model
from workbench.workflow.supervised.supervised_outcome import SupervisedStudy
from workbench.workflow.supervised.supervised_source import predictor_features

FloatArray = NDArray[np.float64]

NUMBER_MEASURES = ("q2", "q2_added", "correlation", "rmse")
CLASS_MEASURES = ("balanced_accuracy", "auc", "brier")
PERFORMANCE_COLUMNS = ("model", "measure", "value", "sd", "lowest", "highest", "error", "p", "of", "as")


def components_table(result: SupervisedResult) -> pd.DataFrame:
    """Return components.tsv: fit in sample and held out with 1, 2, ... components, p of the whole procedure.

    ``r2`` is cumulated; ``q2`` (numbers) or ``auc`` (classes) is the mean over the repeats with that many components,
    ``chosen`` how many the final model has; ``p`` stands in the first row.
    """
    validation = result.validation
    held_out = dict(zip(validation.candidates, validation.by_components.mean(axis=0), strict=True))
    r2 = np.cumsum(_all_components(result))
    count = max(validation.candidates)
    rows = []
    for k in range(1, count + 1):
        p = validation.test.p if k == 1 else None
        rows.append(
            (k, r2[k - 1] if k <= r2.size else np.nan, held_out.get(k, np.nan), p, k == validation.components)
        )
    name = "auc" if result.classes else "q2"
    table = pd.DataFrame(rows, columns=["component", "r2", name, "p", "chosen"])
    return table.astype({"p": float})


def _all_components(result: SupervisedResult) -> FloatArray:
    """Share of the outcome that each component explains in sample, up to the most that were tried."""
    most = max(result.validation.candidates)
    most = min(most, result.study.n - 1, result.values.shape[1])
    if most == result.model.n_components_:
        return np.asarray(result.model.y_explained_)
    return np.asarray(fitted_model(result.study, result.split, most, result.validation.alike).y_explained_)


def performance_table(result: SupervisedResult) -> pd.DataFrame:
    """Return performance.tsv: every figure of samples held out, with its spread over the repeats.

    ``model``: ``all blocks``, ``block NAME alone``, ``nuisance alone``, ``panel``. ``error`` is the standard error of
    an AUC; ``of`` and ``as`` tell the cells of the confusion matrix (samples of a class predicted as another), and of a
    calibration the mean predicted probability and the samples behind it.
    """
    rows = [row for name, figures in _models(result) for row in _rows(result, name, figures)]
    table = pd.DataFrame(rows, columns=list(PERFORMANCE_COLUMNS))
    tests = {
        "all blocks": result.validation.test,
        "panel": result.panel.test if result.panel is not None else None,
    }
    for name, test in tests.items():
        main = (table["model"] == name) & (table["measure"] == result.measure)
        table.loc[main, "p"] = np.nan if test is None or test.p is None else test.p
    return table


def _models(result: SupervisedResult) -> Iterator[tuple[str, ClassPerformance | NumberPerformance]]:
    validation = result.validation
    yield "all blocks", validation.model.performance
    for name, single in zip(result.study.predictors, validation.singles, strict=False):
        yield f"block {name} alone", single.performance
    if validation.nuisance is not None:
        yield "nuisance alone", validation.nuisance.performance
    if result.panel is not None:
        yield "panel", result.panel.performance


def _rows(
    result: SupervisedResult, name: str, figures: ClassPerformance | NumberPerformance
) -> Iterator[tuple[object, ...]]:
    nothing = (np.nan, None, None)
    if isinstance(figures, NumberPerformance):
        for measure in NUMBER_MEASURES:
            if measure != "q2_added" or (result.validation.nuisance is not None and name != "nuisance alone"):
                yield (name, measure, *_spread(getattr(figures, measure)), np.nan, *nothing)
        return
    for measure in CLASS_MEASURES:
        error = figures.auc_error if measure == "auc" else np.nan
        yield (name, measure, *_spread(getattr(figures, measure)), error, *nothing)
    levels = result.study.levels
    for true, row in zip(levels, figures.confusion, strict=True):
        for said, count in zip(levels, row, strict=True):
            yield (name, "samples", count, *[np.nan] * 5, true, said)
    for said, observed, count in figures.calibration:
        yield (name, "calibration", observed, *[np.nan] * 5, f"{said:.3f}", f"{count:.1f} samples")


def _spread(values: FloatArray) -> tuple[float, float, float, float]:
    sd = float(values.std(ddof=1)) if values.size > 1 else np.nan
    return float(values.mean()), sd, float(values.min()), float(values.max())


def explained_table(result: SupervisedResult) -> pd.DataFrame:
    """Return explained.tsv: share of each block's adjusted variance that a super score explains, and its importance."""
    model, rows = result.model, []
    for k in range(model.n_components_):
        for b, block in enumerate(result.blocks):
            rows.append((k + 1, block, "component", model.x_explained_[k, b]))
            rows.append((k + 1, block, "importance", model.block_importance_[k, b]))
        rows.append((k + 1, result.study.name, "outcome", model.y_explained_[k]))
    return pd.DataFrame(rows, columns=["component", "block", "part", "share"])


def predictions_table(result: SupervisedResult) -> pd.DataFrame:
    """Return predictions.tsv: each sample (or subject) as it is and as models that had not seen it predict it."""
    study, model = result.study, result.validation.model
    unit = "subject (first sample)" if study.units.level == "subjects" else "sample"
    table = pd.DataFrame({unit: study.units.names})
    if study.kind == "block":
        return table.assign(scored=np.isfinite(model.predicted).all(axis=2).mean(axis=0))
    with np.errstate(invalid="ignore"):
        if result.classes and model.probabilities is not None and model.classes is not None:
            codes = study.outcome.labels[:, 0]  # type: ignore[union-attr]
            table[study.name] = [study.levels[code] for code in codes]
            mean = model.probabilities.mean(axis=0)
            scored = np.isfinite(mean).all(axis=1)
            best = np.where(scored, np.nan_to_num(mean).argmax(axis=1), -1)
            table["predicted"] = [study.levels[k] if k >= 0 else "" for k in best]
            for g, level in enumerate(study.levels):
                table[f"probability {level}"] = mean[:, g]
            table["recognised"] = np.where(scored, (model.classes == codes).mean(axis=0), np.nan)
            return table
    table[study.name] = study.outcome.values[:, 0, 0] * study.deviations[0] + study.means[0]  # type: ignore[union-attr]
    table["predicted"] = model.predicted[:, :, 0].mean(axis=0) * study.deviations[0] + study.means[0]
    return table


def panel_table(result: SupervisedResult) -> pd.DataFrame:
    """Return panel.tsv: the panel's features, how often training parts chose them, and what could replace them."""
    columns = ["rank", "feature", "block", "layer", "coefficient", "frequency", "vip", "alternatives"]
    panel = result.panel
    if panel is None:
        return pd.DataFrame(columns=columns)
    vip = dict(zip(result.features, result.model.vip_, strict=True))
    rows = []
    for k, (b, j) in enumerate(zip(panel.block, panel.feature, strict=True)):
        block, feature = _named(result.study, int(b), int(j))
        others = [(*_named(result.study, c, i), r) for c, i, r in panel.alternatives[k]]
        rows.append(
            (
                k + 1,
                feature,
                block,
                result.study.view.blocks[block].layer,
                panel.coefficient[k, -1],
                panel.frequency[k],
                vip.get((block, feature), np.nan),
                "; ".join(f"{name} ({where}) r={r:.2f}" for where, name, r in others),
            )
        )
    return pd.DataFrame(rows, columns=columns)


def _named(study: SupervisedStudy, block: int, feature: int) -> tuple[str, str]:
    name = study.predictors[block]
    return name, predictor_features(study, name)[feature]
