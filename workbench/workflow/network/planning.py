"""What a design can find: of the project at hand, or of numbers before there are any data."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from workbench.engine import Nuisance
from workbench.engine.evidence.planning import PairPlan, plan_pairs, plan_sentences
from workbench.workflow.analysis_view import AnalysisView, Shared, view_analysis
from workbench.workflow.network.record import counted_rows
from workbench.workflow.network.screening import design_pairs, is_repeated, space_of
from workbench.workflow.state import ProjectState


@dataclass(frozen=True)
class BlockPairPlan:
    """The plan of one pair of blocks; ``pair`` names it, empty where the numbers are not of a project."""

    pair: str
    plan: PairPlan
    counted: str = ""

    def lines(self) -> list[str]:
        """Return the plan in words."""
        head = [f"{self.pair}:"] if self.pair else []
        indent = "  " if self.pair else ""
        if self.counted:
            head.append(f"  {self.counted} count as {self.plan.samples} independent samples here")
        return [*head, *(f"{indent}{line}" for line in plan_sentences(self.plan))]

    def as_json(self) -> dict[str, Any]:
        """Return the plan as plain values; numbers that cannot be are None."""
        found = asdict(self.plan)
        found = {key: None if value != value else value for key, value in found.items()}
        return {"pair": self.pair, **found, "needed": [{"r": r, "samples": n} for r, n in self.plan.needed]}


def project_plans(
    state: ProjectState, analysis: str, *, share: float, power: float, samples: int | None = None
) -> list[BlockPairPlan]:
    """Return what the design of an analysis can find, for each pair of its blocks as they are prepared.

    With ``samples`` the same design is asked of another number of samples.
    """
    view = view_analysis(state, analysis)
    shared = [view.shared(pair) for pair in view.pairs]
    plans = []
    sizes = design_sizes(view, shared, view.within_groups)
    for (first, second), one, (found, rank) in zip(view.pairs, shared, sizes, strict=True):
        features = [len(view.blocks[name].features) for name in (first, second)]
        rate = view.settings.network.fdr
        plan = plan_pairs(samples or found, features, rank=rank, fdr=rate, share=share, power=power)
        counted = counted_rows(one, view) if is_repeated(one) and samples is None else ""
        plans.append(BlockPairPlan(f"{first} x {second}", plan, counted))
    return plans


def design_sizes(view: AnalysisView, shared: Sequence[Shared], within: bool) -> list[tuple[int, int]]:
    """Return the independent samples of each block pair, and the dimensions of what is removed from them.

    Changes within subjects whose common course is removed count as so many samples whose mean is removed.
    """
    sizes = []
    for one, pair in zip(shared, design_pairs(view, shared, within), strict=True):
        if is_repeated(one) and one.subjects is not None:
            space = space_of(pair, one.subjects, view.settings.level or "visits", "pearson")
            spare = int(space.contrasts is not None and space.nuisance.rank > 1)
            sizes.append((space.nuisance.n_samples - spare, space.nuisance.rank - spare))
        else:
            sizes.append((one.n, Nuisance.of(np.asarray(pair.nuisance), one.n).rank))
    return sizes


def plan_of_numbers(
    samples: int,
    features: Sequence[int],
    *,
    taken: int = 0,
    fdr: float = 0.05,
    share: float,
    power: float,
) -> list[BlockPairPlan]:
    """Return the plan of a study that is not there yet; ``taken`` samples go to groups, batches and other nuisance."""
    return [
        BlockPairPlan("", plan_pairs(samples, features, rank=1 + taken, fdr=fdr, share=share, power=power))
    ]
