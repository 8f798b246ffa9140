"""Numerics of the workbench: arrays in, frozen results out; it knows no files and no tables."""

from __future__ import annotations

from workbench.engine.canonical.cca import RegularisedCCA
from workbench.engine.canonical.generalised_cca import GeneralisedCCA
from workbench.engine.canonical.generalised_permutation import generalised_pair_test
from workbench.engine.canonical.generalised_validation import blocks_source, cross_validated_components
from workbench.engine.canonical.permutation import PairTest, canonical_pair_test
from workbench.engine.canonical.ridge_choice import RidgeChoice, choose_ridge
from workbench.engine.canonical.splits import SideSplit, Split, SplitSource, array_source
from workbench.engine.canonical.validation import CrossValidation, cross_validated_correlations
from workbench.engine.evidence.clusters import FeatureClusters, near_duplicates
from workbench.engine.evidence.differential import (
    DifferenceFigures,
    DifferentialScreen,
    differences_of,
    screen_differences,
)
from workbench.engine.evidence.evidence import EdgeEvidence, edge_evidence
from workbench.engine.evidence.planning import (
    PairPlan,
    independent_samples,
    plan_pairs,
    plan_sentences,
    power_of,
    samples_needed,
    smallest_correlation,
)
from workbench.engine.evidence.stability import HalfScreen, PairStability, half_samples, pair_stability
from workbench.engine.evidence.strongest import Strongest, strongest_pairs
from workbench.engine.folds import balanced_folds
from workbench.engine.look.effects import GroupEffects, group_effects
from workbench.engine.multiple import benjamini_hochberg
from workbench.engine.nuisance import (
    FittedResiduals,
    Nuisance,
    Standardised,
    aliased,
    fit_residuals,
    standardise,
)
from workbench.engine.odd_rows import SteadyRows, steady_rows
from workbench.engine.pairs.intervals import fisher_interval
from workbench.engine.pairs.lookup import PairFigures
from workbench.engine.pairs.repeated import screen_repeated, without_subject
from workbench.engine.pairs.screen import BlockPair, BlockScreen, PairScreen, screen_blocks, screen_pairs
from workbench.engine.pairs.subject_space import SubjectSpace, by_visit, subject_space
from workbench.engine.pairs.tiles import Limits
from workbench.engine.subjects import (
    SubjectDesign,
    centred,
    differences,
    subject_labels,
    subject_means,
    whole_subject_folds,
)
from workbench.engine.supervised.double_outcome import ClassOutcome, NumberOutcome
from workbench.engine.supervised.double_splits import BlockSource, BlockSplit, block_source, standard_split
from workbench.engine.supervised.double_validation import DoubleValidation, HeldOutModel, double_validation
from workbench.engine.supervised.multiblock_pls import MultiblockDiscriminant, MultiblockPLS
from workbench.engine.supervised.panel_selection import PANEL_CAUTION, Panel, PanelSearch, select_panel
from workbench.engine.supervised.performance_measures import (
    ClassPerformance,
    NumberPerformance,
    roc_curve,
)
from workbench.engine.tails import critical_r

__all__ = [
    "PANEL_CAUTION",
    "BlockPair",
    "BlockScreen",
    "BlockSource",
    "BlockSplit",
    "ClassOutcome",
    "ClassPerformance",
    "CrossValidation",
    "DifferenceFigures",
    "DifferentialScreen",
    "DoubleValidation",
    "EdgeEvidence",
    "FeatureClusters",
    "FittedResiduals",
    "GeneralisedCCA",
    "GroupEffects",
    "HalfScreen",
    "HeldOutModel",
    "Limits",
    "MultiblockDiscriminant",
    "MultiblockPLS",
    "Nuisance",
    "NumberOutcome",
    "NumberPerformance",
    "PairFigures",
    "PairPlan",
    "PairScreen",
    "PairStability",
    "PairTest",
    "Panel",
    "PanelSearch",
    "RegularisedCCA",
    "RidgeChoice",
    "SideSplit",
    "Split",
    "SplitSource",
    "Standardised",
    "SteadyRows",
    "Strongest",
    "SubjectDesign",
    "SubjectSpace",
    "aliased",
    "array_source",
    "balanced_folds",
    "benjamini_hochberg",
    "block_source",
    "blocks_source",
    "by_visit",
    "canonical_pair_test",
    "centred",
    "choose_ridge",
    "critical_r",
    "cross_validated_components",
    "cross_validated_correlations",
    "differences",
    "differences_of",
    "double_validation",
    "edge_evidence",
    "fisher_interval",
    "fit_residuals",
    "generalised_pair_test",
    "group_effects",
    "half_samples",
    "independent_samples",
    "near_duplicates",
    "pair_stability",
    "plan_pairs",
    "plan_sentences",
    "power_of",
    "roc_curve",
    "samples_needed",
    "screen_blocks",
    "screen_differences",
    "screen_pairs",
    "screen_repeated",
    "select_panel",
    "smallest_correlation",
    "standard_split",
    "standardise",
    "steady_rows",
    "strongest_pairs",
    "subject_labels",
    "subject_means",
    "subject_space",
    "whole_subject_folds",
    "without_subject",
]
