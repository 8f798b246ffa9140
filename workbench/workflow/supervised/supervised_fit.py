"""Multi-block PLS of one analysis: fitted, validated by double cross-validation, with its marker panel."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine import (
    BlockSplit,
    ClassOutcome,
    DoubleValidation,
    MultiblockDiscriminant,
    MultiblockPLS,
    NumberOutcome,
    Panel,
    PanelSearch,
    double_validation,
)
from workbench.engine.supervised.double_arrangements import Arrangements, outcome_arrangements
from workbench.errors import InputError, NumericsError
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.reporting import Reporter
from workbench.workflow.supervised.supervised_outcome import SupervisedStudy, supervised_study
from workbench.workflow.supervised.supervised_source import (
    blocks_of_split,
    predictor_features,
    supervised_source,
    whole_split,
)

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]

MOST_COMPONENTS = 8
SAMPLES_EACH = 8
"""Units for each component that may be tried."""
PANEL_PERMUTATIONS = 99
"""Most arrangements of the outcome for which panels are chosen anew: each takes as long as a repeat of the search."""


@dataclass(frozen=True, eq=False)
class SupervisedResult:
    """What was fitted and how it does on samples that were held out.

    Attributes
    ----------
    study : SupervisedStudy
    blocks : tuple of str
        Blocks of the model; the other predictors were better left out.
    split : BlockSplit
        All units as the training part, these blocks.
    model : MultiblockPLS or MultiblockDiscriminant
        Fitted to ``split``, blocks side by side.
    validation : DoubleValidation
    panel : Panel or None
        None for a block as outcome.
    """

    study: SupervisedStudy
    blocks: tuple[str, ...]
    split: BlockSplit
    model: MultiblockPLS | MultiblockDiscriminant
    validation: DoubleValidation
    panel: Panel | None

    @property
    def features(self) -> list[tuple[str, str]]:
        """Block and name of every feature of the model, blocks side by side."""
        return [
            (name, features[k])
            for name, kept in zip(self.blocks, self.split.kept, strict=True)
            for features in (predictor_features(self.study, name),)
            for k in kept
        ]

    @property
    def values(self) -> FloatArray:
        """Standardised values of all units, blocks side by side."""
        return np.hstack(self.split.train)

    @property
    def classes(self) -> bool:
        """Whether the outcome is of classes."""
        return self.study.kind == "classes"

    @property
    def measure(self) -> str:
        """Name of the figure that the permutation test is about."""
        if self.classes:
            return "auc"
        return "q2_added" if self.validation.nuisance is not None else "q2"


def supervised_result(view: AnalysisView, reporter: Reporter) -> SupervisedResult:
    """Fit, validate and test multi-block PLS of an analysis, and choose its panel.

    Raises
    ------
    InputError
        When outcome or folds cannot be had from these samples.
    """
    study = supervised_study(view)
    split, outcome = whole_split(study), study.outcome
    sizes = [len(predictor_features(study, name)) for name in study.predictors]
    settings, nuisance = view.settings, study.units.nuisance
    search = None if study.kind == "block" else PanelSearch(outcome, sizes, arrangements=_panel_test(study))
    with reporter.progress("double cross-validation") as progress:
        try:
            validation = double_validation(
                supervised_source(study),
                outcome,
                nuisance=nuisance if nuisance.size else None,
                subjects=study.units.folds,
                strata=_strata(study),
                exchange=exchange_levels(study),
                candidates=candidates(study),
                folds=settings.folds,
                repeats=settings.repeats,
                permutations=settings.permutations,
                seed=settings.seed,
                observe=search,
                progress=progress,
            )
        except NumericsError as error:
            raise InputError(
                f"analysis '{view.name}': no out-of-sample figure can be had, and none in sample is shown without: "
                f"{error}. Set fewer folds (now {settings.folds}) or components under [analyses.{view.name}]"
            ) from error
    panel = None if search is None else search.panel(split)
    chosen = blocks_of_split(split, validation.blocks)
    names = tuple(study.predictors[b] for b in validation.blocks)
    model = fitted_model(study, chosen, validation.components, validation.alike)
    return SupervisedResult(study, names, chosen, model, validation, panel)


def _panel_test(study: SupervisedStudy) -> Arrangements:
    """Arrangements of the outcome for the test of the panel."""
    settings = study.view.settings
    count = min(PANEL_PERMUTATIONS, settings.permutations)
    return outcome_arrangements(
        study.outcome.delivered,
        count,
        settings.seed,
        subjects=study.units.folds,
        exchange=exchange_levels(study),
    )


def fitted_model(
    study: SupervisedStudy, split: BlockSplit, components: int, alike: str
) -> MultiblockPLS | MultiblockDiscriminant:
    """Return the model of all units with a number of components, in which blocks or features count alike."""
    sizes, values = [part.shape[1] for part in split.train], np.hstack(split.train)
    outcome = study.outcome
    if isinstance(outcome, ClassOutcome):
        return MultiblockDiscriminant(components, block_sizes=sizes, alike=alike).fit(
            values, outcome.labels[:, 0]
        )
    assert isinstance(outcome, NumberOutcome)
    codes = outcome.codes(np.arange(study.n))[:, :, 0]
    return MultiblockPLS(components, block_sizes=sizes, alike=alike).fit(values, codes)


def candidates(study: SupervisedStudy) -> tuple[int, ...]:
    """Return the numbers of components to choose from: the one asked for, or 1 to 8 as far as the units allow."""
    asked = study.view.settings.components
    if asked != "auto":
        return (int(asked),)
    return tuple(range(1, max(1, min(MOST_COMPONENTS, study.n // SAMPLES_EACH)) + 1))


def exchange_levels(study: SupervisedStudy) -> IndexArray | None:
    """Levels of the nuisance within which classes are exchanged; None where they leave too few arrangements.

    Numbers need none: their residuals from the nuisance are exchanged.
    """
    strata = _strata(study)
    if strata is None or study.kind != "classes":
        return None
    levels = np.unique(strata, axis=0, return_inverse=True)[1].reshape(-1)
    subjects = study.units.folds
    tried = outcome_arrangements(study.outcome.delivered, 0, 0, subjects=subjects, exchange=levels)
    return levels if tried.withheld is None else None


def _strata(study: SupervisedStudy) -> NDArray[np.float64] | None:
    """Return the nuisance classes, to be spread over the folds beside the classes of the outcome."""
    columns = [column for column in study.units.nuisance.T if np.isin(column, (0.0, 1.0)).all()]
    return np.column_stack(columns) if columns else None
