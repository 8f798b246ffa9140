"""What a supervised analysis found, in sentences: held-out figures first, and what speaks against them."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from workbench.engine import PANEL_CAUTION, ClassPerformance, NumberPerformance
from workbench.engine.supervised.double_arrangements import PermutationNull
from workbench.intake.faults import counted
from workbench.workflow.supervised.supervised_fit import SupervisedResult
from workbench.workflow.supervised.supervised_leaks import leaks

FloatArray = NDArray[np.float64]

TINY_BLOCK = 50
"""Features of the largest block for each of the smallest from which their equal weight is told."""


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
        lines.append(
            f"{counted(len(study.left_out), 'sample')} left out: {next(iter(study.left_out.values()))}"
        )
    for block, features in study.excluded.items():
        lines.append(
            f"{block}: {', '.join(features[:5])}{' and others' if len(features) > 5 else ''} not among the predictors: "
            f"the same as the outcome '{study.name}'"
        )
    if study.units.level == "subjects":
        lines.append(f"subjects are compared, each by the mean of its samples: {counted(study.n, 'subject')}")
    if study.units.level == "visits":
        lines.append("changes within subjects: each sample less its subject's mean, folds whole per subject")
    if result.classes:
        counts = np.bincount(study.outcome.labels[:, 0])  # type: ignore[union-attr]
        told = ", ".join(f"{count} {level}" for level, count in zip(study.levels, counts, strict=True))
        lines.append(f"outcome {study.name}: {told} (order of levels: {' < '.join(study.levels)})")
    return lines


def _of_model(result: SupervisedResult) -> list[str]:
    validation, figures = result.validation, result.validation.model.performance
    p = _p_told(validation.test)
    count = counted(validation.components, "component")
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


def _p_told(test: PermutationNull) -> str:
    if test.p is None:
        return f"p withheld: {test.withheld}" if test.withheld else "no p: permutations = 0"
    return f"p = {test.p:.3g} ({counted(test.null.size, 'permutation')}, {test.how})"


def _of_blocks(result: SupervisedResult) -> list[str]:
    """Say which blocks the model leaves out, how often training parts left each out, and what counts alike."""
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
    lines = [f"{used} (share of training parts that took each block: {told})"]
    if len(result.blocks) > 1:
        share = result.validation.model.features_alike.mean()
        other = f"{share:.0%} of the training parts let features count alike, the others blocks"
        lines.append(f"in the final model {result.validation.alike} count alike ({other})")
    return lines


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
        count = counted(len(result.study.levels), "feature")
        return [
            f"no panel: the outcome is a block of {count}, and a panel is chosen for one outcome; name a column of the "
            "sample sheet as outcome for one"
        ]
    steady = int((panel.frequency >= 0.5).sum())
    measure = "balanced accuracy" if result.classes else "Q2"
    least, most = int(panel.sizes.min()), int(panel.sizes.max())
    chosen = (
        f"of {counted(least, 'feature')}" if least == most else f"of {least} to {counted(most, 'feature')}"
    )
    p = "" if panel.test is None else f", {_p_told(panel.test)}, ranking and size chosen anew in each"
    return [
        f"panel of {counted(panel.feature.size, 'feature')}; the procedure that chose it has {measure} "
        f"{_main(panel.performance):.2f} held out{p} (panels chosen there: {chosen})",
        f"{steady} of the panel's {counted(panel.feature.size, 'feature')} in half or more of the panels chosen there",
        PANEL_CAUTION,
    ]


def _cautions(result: SupervisedResult) -> list[str]:
    study, lines = result.study, leaks(result)
    smallest = study.n
    if result.classes:
        smallest = int(np.bincount(study.outcome.labels[:, 0]).min())  # type: ignore[union-attr]
    features = sum(part.shape[1] for part in result.split.train)
    if smallest < 15 or study.n < 30:
        reach, many = 1.0 / np.sqrt(study.n), counted(features, "feature")
        lines.append(
            f"few samples: {study.n} ({smallest} in the smallest class) against {many}; a held-out "
            f"figure of so few moves by about {reach:.2f} by chance alone, and no other cohort has been asked"
            if result.classes
            else f"few samples: {study.n} against {many}; held-out figures of so few move much by chance"
        )
    sizes = [part.shape[1] for part in result.split.train]
    if result.validation.alike == "blocks" and min(sizes) * TINY_BLOCK < max(sizes):
        small, large = int(np.argmin(sizes)), int(np.argmax(sizes))
        lines.append(
            f"blocks count alike: {result.blocks[small]} ({counted(sizes[small], 'feature')}) as much as "
            f"{result.blocks[large]} ({sizes[large]:,})"
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
