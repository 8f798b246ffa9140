"""Continuous readings: as delivered, or transformed on request; gaps filled."""

from __future__ import annotations

from workbench.prepare.combining import CombineRuns
from workbench.prepare.gaps import FillGaps
from workbench.prepare.steps import DropFlat, DropRarelySeen, DropUnusable, Step
from workbench.prepare.transforms import transform_steps
from workbench.settings.prepare_schema import ContinuousPreparation


def continuous_steps(settings: ContinuousPreparation) -> tuple[Step, ...]:
    """Return the steps for continuous values, in order."""
    return (
        DropUnusable(),
        DropRarelySeen(settings.seen_share),
        *transform_steps(settings),
        CombineRuns(),
        FillGaps(censored=False),
        DropFlat(),
    )
