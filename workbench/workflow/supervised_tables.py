"""Tables and sentences of a supervised analysis: every in-sample figure stands beside its held-out one."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import PANEL_CAUTION, ClassPerformance, NumberPerformance
from workbench.workflow.supervised_fit import SupervisedResult, fitted_model
from workbench.workflow.supervised_outcome import SupervisedStudy
from workbench.workflow.supervised_source import predictor_features

FloatArray = NDArray[np.float64]

TINY_BLOCK = 50
"""Features of the largest block for each of the smallest from which their equal weight is told."""

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
    return np.asarray(fitted_model(result.study, result.split, most).y_explained_)


def performance_table(result: SupervisedResult) -> pd.DataFrame:
    """Return performance.tsv: every figure of samples held out, with its spread over the repeats.

    ``model``: ``all blocks``, ``block NAME alone``, ``nuisance alone``, ``panel``. ``error`` is the standard error of
    an AUC; ``of`` and ``as`` tell the cells of the confusion matrix (samples of a class predicted as another), and of a
    calibration the mean predicted probability and the samples behind it.
    """
    rows = [row for name, figures in _models(result) for row in _rows(result, name, figures)]
    table = pd.DataFrame(rows, columns=list(PERFORMANCE_COLUMNS))
    main = (table["model"] == "all blocks") & (table["measure"] == result.measure)
    table.loc[main, "p"] = result.validation.test.p
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


def describe(result: SupervisedResult) -> list[str]:
    """Return what was found in a few plain sentences, the held-out figure first."""
    lines = [
        *_of_study(result),
        *_of_model(result),
        *_of_blocks(result),
        *_of_others(result),
        *_of_panel(result),
    ]
    return [*lines, *_cautions(result)]


def _of_study(result: SupervisedResult) -> list[str]:
    study = result.study
    lines = []
    if study.left_out:
        lines.append(f"{len(study.left_out)} samples left out: {next(iter(study.left_out.values()))}")
    for block, features in study.excluded.items():
        lines.append(
            f"{block}: {', '.join(features[:5])}{' and others' if len(features) > 5 else ''} not among the predictors: "
            f"the same as the outcome '{study.name}'"
        )
    if study.units.level == "subjects":
        lines.append(f"subjects are compared, each by the mean of its samples: {study.n} subjects")
    if study.units.level == "visits":
        lines.append("changes within subjects: each sample less its subject's mean, folds whole per subject")
    if result.classes:
        counts = np.bincount(study.outcome.labels[:, 0])  # type: ignore[union-attr]
        told = ", ".join(f"{count} {level}" for level, count in zip(study.levels, counts, strict=True))
        lines.append(f"outcome {study.name}: {told} (order of levels: {' < '.join(study.levels)})")
    return lines


def _of_model(result: SupervisedResult) -> list[str]:
    validation, figures = result.validation, result.validation.model.performance
    test = validation.test
    p = (
        f"p = {test.p:.3g} ({test.null.size} permutations, {test.how})"
        if test.p is not None
        else f"p withheld: {test.withheld}"
    )
    count = f"{validation.components} component{'s' * (validation.components > 1)}"
    if isinstance(figures, ClassPerformance):
        n = len(result.study.levels)
        return [
            f"held out: balanced accuracy {_with_spread(figures.balanced_accuracy)} (chance {1.0 / n:.2f}), AUC "
            f"{_with_spread(figures.auc)} (standard error {figures.auc_error:.2f}), Brier score "
            f"{figures.brier.mean():.2f} (knowing nothing: {1.0 - 1.0 / n:.2f}); {p}",
            f"the final model has {count}; in sample it explains {result.model.y_explained_.sum():.0%} of the "
            "outcome, which says nothing about other samples",
        ]
    added = (
        f", added to the nuisance {_with_spread(figures.q2_added)}" if validation.nuisance is not None else ""
    )
    return [
        f"held out: Q2 {_with_spread(figures.q2)}{added}; correlation with the truth "
        f"{figures.correlation.mean():.2f}; {p}",
        f"the final model has {count}; R2 in sample {result.model.y_explained_.sum():.2f}, which says nothing about "
        "other samples",
    ]


def _of_blocks(result: SupervisedResult) -> list[str]:
    """Say which blocks the model leaves out, and how often training parts left each out."""
    predictors = result.study.predictors
    left = [name for name in predictors if name not in result.blocks]
    if len(predictors) == 1:
        return []
    shares = result.validation.model.blocks.mean(axis=(0, 1))[: len(predictors)]
    told = ", ".join(f"{name} {share:.0%}" for name, share in zip(predictors, shares, strict=True))
    used = (
        f"left out of the final model, better without: {', '.join(left)}"
        if left
        else "the model takes all blocks"
    )
    return [f"{used} (share of training parts that took each block: {told})"]


def _of_others(result: SupervisedResult) -> list[str]:
    validation, lines = result.validation, []
    if validation.singles:
        figures = [_main(single.performance) for single in validation.singles]
        best = int(np.argmax(figures))
        gain = _main(validation.model.performance) - figures[best]
        measure = "balanced accuracy" if result.classes else "Q2"
        lines.append(
            f"best single block: {result.study.predictors[best]}, {measure} {figures[best]:.2f}; choosing among all "
            f"blocks {'adds' if gain > 0 else 'loses'} {abs(gain):.2f} (the best of {len(figures)} is picked by its "
            "own figure)"
        )
    if validation.nuisance is not None:
        measure = "balanced accuracy" if result.classes else "Q2"
        lines.append(
            f"from the nuisance alone: {measure} {_main(validation.nuisance.performance):.2f}; the blocks are used "
            "with the nuisance removed, so that theirs comes on top of it"
        )
    return lines


def _of_panel(result: SupervisedResult) -> list[str]:
    panel = result.panel
    if panel is None:
        return []
    steady = int((panel.frequency >= 0.5).sum())
    measure = "balanced accuracy" if result.classes else "Q2"
    return [
        f"panel of {panel.feature.size} features; the procedure that chose it has {measure} "
        f"{_main(panel.performance):.2f} held out (sizes chosen there: {panel.sizes.min()} to {panel.sizes.max()}); "
        f"{steady} of its features are in half or more of the training parts' panels",
        PANEL_CAUTION,
    ]


def _cautions(result: SupervisedResult) -> list[str]:
    study, lines = result.study, []
    smallest = study.n
    if result.classes:
        smallest = int(np.bincount(study.outcome.labels[:, 0]).min())  # type: ignore[union-attr]
    features = sum(part.shape[1] for part in result.split.train)
    if smallest < 15 or study.n < 30:
        reach = 1.0 / np.sqrt(study.n)
        lines.append(
            f"few samples: {study.n} ({smallest} in the smallest class) against {features:,} features; a held-out "
            f"figure of so few moves by about {reach:.2f} by chance alone, and no other cohort has been asked"
            if result.classes
            else f"few samples: {study.n} against {features:,} features; held-out figures of so few move much by chance"
        )
    sizes = [part.shape[1] for part in result.split.train]
    if min(sizes) * TINY_BLOCK < max(sizes):
        small, large = int(np.argmin(sizes)), int(np.argmax(sizes))
        lines.append(
            f"blocks weigh alike: {result.blocks[small]} ({sizes[small]} features) as much as "
            f"{result.blocks[large]} ({sizes[large]:,}); if it is noise, it costs components: compare without it"
        )
    test = result.validation.test
    if test.p is not None and test.p > 0.05:
        lines.append("not told from chance: do not read the panel, the importance or the scores as findings")
    return lines


def _main(figures: ClassPerformance | NumberPerformance) -> float:
    values = figures.balanced_accuracy if isinstance(figures, ClassPerformance) else figures.q2
    return float(values.mean())


def _with_spread(values: FloatArray) -> str:
    if values.size == 1:
        return f"{values.mean():.2f}"
    return f"{values.mean():.2f} ({values.min():.2f} to {values.max():.2f} over {values.size} repeats)"
