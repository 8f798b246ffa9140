"""Numerics of the workbench: arrays in, frozen results out; it knows no files and no tables."""

from __future__ import annotations

from workbench.engine.effects import GroupEffects, group_effects
from workbench.engine.evidence import EdgeEvidence, edge_evidence
from workbench.engine.intervals import fisher_interval
from workbench.engine.lookup import PairFigures
from workbench.engine.multiple import benjamini_hochberg
from workbench.engine.nuisance import (
    FittedResiduals,
    Nuisance,
    Standardised,
    aliased,
    fit_residuals,
    standardise,
)
from workbench.engine.screen import BlockPair, BlockScreen, PairScreen, screen_blocks, screen_pairs
from workbench.engine.tiles import Limits

__all__ = [
    "BlockPair",
    "BlockScreen",
    "EdgeEvidence",
    "FittedResiduals",
    "GroupEffects",
    "Limits",
    "Nuisance",
    "PairFigures",
    "PairScreen",
    "Standardised",
    "aliased",
    "benjamini_hochberg",
    "edge_evidence",
    "fisher_interval",
    "fit_residuals",
    "group_effects",
    "screen_blocks",
    "screen_pairs",
    "standardise",
]
