"""The stability of edges: how often each is among the strongest pairs of half of the samples."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.engine.repeated import Level
from workbench.engine.stability import HalfScreen, StrongestOf, pair_stability
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.reporting import Reporter
from workbench.workflow.screening import Screens

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Steadiness:
    """Share of half-samples of each edge (NaN where there is none), and why where a block pair has none."""

    share: FloatArray
    halves: int
    reasons: tuple[str, ...]


def edge_stability(view: AnalysisView, screens: Screens, reporter: Reporter) -> Steadiness | None:
    """Return the stability of the chosen edges, all that is learnt from samples redone in every half.

    None when the settings turn it off, or there is no edge.
    """
    halves, found = view.settings.network.stability, screens.chosen.found
    if halves < 2 or not found.r.size:
        return None
    used = {sample for one in screens.shared for sample in one.samples}
    samples = [str(sample) for sample in view.sheet.index if sample in used]
    place = {sample: row for row, sample in enumerate(samples)}
    rows = [np.array([place[sample] for sample in one.samples], dtype=np.intp) for one in screens.shared]
    held = np.zeros((len(samples), len(rows)), dtype=np.bool_)
    for k, own in enumerate(rows):
        held[own, k] = True
    level = (view.settings.level or "visits") if screens.chosen.repeated else None
    edges = np.column_stack([found.pair_index, found.i, found.j])
    with reporter.progress("half-samples") as progress:
        result = pair_stability(
            len(samples),
            _labels(view, samples, view.factors),
            _labels(view, samples, list(filter(None, [view.study.samples.subject]))),
            halves,
            _strongest(screens, rows, level),
            edges,
            held=held,
            level=level,
            seed=view.settings.seed,
            progress=progress,
        )
    return Steadiness(result.share, result.halves, result.reasons)


def _labels(view: AnalysisView, samples: list[str], columns: list[str]) -> NDArray[np.str_] | None:
    """Return one label for each sample from some columns of the sample sheet; None without columns."""
    if not columns:
        return None
    cells = view.sheet.loc[samples, columns].astype(str)
    return np.array(["\x1f".join(row) for row in cells.itertuples(index=False)])


def _strongest(screens: Screens, rows: list[IndexArray], level: Level | None) -> StrongestOf:
    chosen = screens.chosen
    designs = [one.subjects for one in screens.shared if one.subjects is not None]
    return HalfScreen(
        chosen.pairs,
        rows,
        chosen.found.correlation,
        designs=designs if chosen.repeated else None,
        level=level,
    )


def stability_lines(steady: Steadiness | None) -> list[str]:
    """Return what is to be said of the stability: how many edges are steady, or why there is none."""
    if steady is None:
        return []
    lines = list(dict.fromkeys(reason for reason in steady.reasons if reason))
    known = steady.share[~np.isnan(steady.share)]
    if known.size:
        lines.append(
            f"{int((known >= 0.5).sum()):,} of {known.size:,} edges are among the strongest pairs in at least half of "
            f"{steady.halves} half-samples (stability)"
        )
    return [f"no stability: {line}" if line.startswith("a half") else line for line in lines]
