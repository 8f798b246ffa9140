"""Numerics of the workbench: arrays in, frozen results out; it knows no files and no tables."""

from __future__ import annotations

from workbench.engine.cca import RegularisedCCA
from workbench.engine.effects import GroupEffects, group_effects
from workbench.engine.evidence import EdgeEvidence, edge_evidence
from workbench.engine.folds import balanced_folds
from workbench.engine.intervals import fisher_interval
from workbench.engine.lookup import PairFigures
from workbench.engine.multiblock_pls import MultiblockDiscriminant, MultiblockPLS
from workbench.engine.multiple import benjamini_hochberg
from workbench.engine.nuisance import (
    FittedResiduals,
    Nuisance,
    Standardised,
    aliased,
    fit_residuals,
    standardise,
)
from workbench.engine.permutation import PairTest, canonical_pair_test
from workbench.engine.repeated import (
    SubjectSpace,
    by_visit,
    screen_repeated,
    subject_space,
    without_subject,
)
from workbench.engine.ridge_choice import RidgeChoice, choose_ridge
from workbench.engine.screen import BlockPair, BlockScreen, PairScreen, screen_blocks, screen_pairs
from workbench.engine.splits import Split, SplitSource, array_source
from workbench.engine.subjects import (
    SubjectDesign,
    centred,
    differences,
    subject_labels,
    subject_means,
    whole_subject_folds,
)
from workbench.engine.tails import critical_r
from workbench.engine.tiles import Limits
from workbench.engine.validation import CrossValidation, cross_validated_correlations

__all__ = [
    "BlockPair",
    "BlockScreen",
    "CrossValidation",
    "EdgeEvidence",
    "FittedResiduals",
    "GroupEffects",
    "Limits",
    "MultiblockDiscriminant",
    "MultiblockPLS",
    "Nuisance",
    "PairFigures",
    "PairScreen",
    "PairTest",
    "RegularisedCCA",
    "RidgeChoice",
    "Split",
    "SplitSource",
    "Standardised",
    "SubjectDesign",
    "SubjectSpace",
    "aliased",
    "array_source",
    "balanced_folds",
    "benjamini_hochberg",
    "by_visit",
    "canonical_pair_test",
    "centred",
    "choose_ridge",
    "critical_r",
    "cross_validated_correlations",
    "differences",
    "edge_evidence",
    "fisher_interval",
    "fit_residuals",
    "group_effects",
    "screen_blocks",
    "screen_pairs",
    "screen_repeated",
    "standardise",
    "subject_labels",
    "subject_means",
    "subject_space",
    "whole_subject_folds",
    "without_subject",
]
