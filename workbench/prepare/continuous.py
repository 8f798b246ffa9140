"""Continuous readings: as delivered, gaps filled."""

from __future__ import annotations

from workbench.prepare.combining import CombineRuns
from workbench.prepare.gaps import FillGaps
from workbench.prepare.steps import DropFlat, DropRarelySeen, DropUnusable, Step


def continuous_steps() -> tuple[Step, ...]:
    """Return the steps for continuous values, in order."""
    return (DropUnusable(), DropRarelySeen(), CombineRuns(), FillGaps(censored=False), DropFlat())
