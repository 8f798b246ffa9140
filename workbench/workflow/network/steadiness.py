"""The stability of edges: how often each is among the strongest pairs of half of the samples."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from workbench.engine.evidence.stability import (
    LEAST_FREEDOM,
    SMALLEST_HALF,
    HalfScreen,
    HintedStrongest,
    StrongestOf,
    pair_freedom,
    pair_stability,
)
from workbench.engine.pairs.subject_space import Level
from workbench.engine.private.private_variation import LayerBlock, pairs_without_private
from workbench.network import Key
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.network.screening import Screens, design_pairs, layer_block
from workbench.workflow.reporting import Reporter

KEPT = 20
"""Half-samples whose pairs are kept, to see how stable the communities are."""

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Steadiness:
    """Share of half-samples of each edge (NaN where there is none), and why where a block pair has none.

    ``found`` are the strongest pairs of the first half-samples: place of the block pair and of both features.
    """

    share: FloatArray
    halves: int
    reasons: tuple[str, ...]
    found: tuple[IndexArray, ...]


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
    strongest = _strongest(view, screens, samples, rows, level)
    kept: list[IndexArray] = []

    def recorded(part: IndexArray, count: int) -> IndexArray:
        pairs = strongest(part, count)
        if len(kept) < KEPT:
            kept.append(pairs)
        return pairs

    with reporter.progress("half-samples") as progress:
        result = pair_stability(
            len(samples),
            _labels(view, samples, view.factors),
            _labels(view, samples, list(filter(None, [view.study.samples.subject]))),
            halves,
            recorded,
            edges,
            held=held,
            level=level,
            seed=view.settings.seed,
            progress=progress,
        )
    return Steadiness(result.share, result.halves, result.reasons, tuple(kept))


def half_edges(view: AnalysisView, found: IndexArray) -> list[tuple[Key, Key]]:
    """Return the strongest pairs of a half-sample as pairs of features, each named by its block and itself."""
    return [
        (
            (view.pairs[pair][0], view.blocks[view.pairs[pair][0]].features[i]),
            (view.pairs[pair][1], view.blocks[view.pairs[pair][1]].features[j]),
        )
        for pair, i, j in np.asarray(found).tolist()
    ]


def _labels(view: AnalysisView, samples: list[str], columns: list[str]) -> NDArray[np.str_] | None:
    """Return one label for each sample from some columns of the sample sheet; None without columns."""
    if not columns:
        return None
    cells = view.sheet.loc[samples, columns].astype(str)
    return np.array(["\x1f".join(row) for row in cells.itertuples(index=False)])


def _strongest(
    view: AnalysisView, screens: Screens, samples: list[str], rows: list[IndexArray], level: Level | None
) -> StrongestOf:
    chosen = screens.chosen
    if view.settings.network.remove_private and not chosen.repeated:
        return HalfCleaned.of(view, samples, within=screens.within is chosen)
    designs = [one.subjects for one in screens.shared if one.subjects is not None]
    return HalfScreen(
        design_pairs(view, screens.shared, screens.within is chosen),
        rows,
        chosen.found.correlation,
        designs=designs if chosen.repeated else None,
        level=level,
        remove_private=view.settings.network.remove_private,
        seed=view.settings.seed,
    )


@dataclass
class HalfCleaned:
    """The strongest pairs of some samples, private variation told and removed again on them.

    ``places`` are the positions of each pair's blocks, ``positions`` the study's samples among the sheet's rows.
    """

    blocks: Sequence[LayerBlock]
    places: Sequence[tuple[int, int]]
    positions: IndexArray
    strongest: HintedStrongest
    seed: int

    @classmethod
    def of(cls, view: AnalysisView, samples: Sequence[str], *, within: bool) -> HalfCleaned:
        """Prepare the half-samples of an analysis over the named samples."""
        names = list(view.blocks)
        place = {str(sample): row for row, sample in enumerate(view.sheet.index)}
        return cls(
            [layer_block(view, name, within) for name in names],
            [(names.index(first), names.index(second)) for first, second in view.pairs],
            np.array([place[sample] for sample in samples], dtype=np.intp),
            HintedStrongest(view.settings.network.correlation),
            view.settings.seed,
        )

    def __call__(self, rows: IndexArray, count: int) -> IndexArray:
        """Return (pair of blocks, i, j) of the strongest pairs of the study's samples ``rows``."""
        half = [_taken(block, self.positions[rows]) for block in self.blocks]
        able = [
            k
            for k, (a, b) in enumerate(self.places)
            if np.intersect1d(half[a].rows, half[b].rows).size >= SMALLEST_HALF
        ]
        made = pairs_without_private(
            half, [self.places[k] for k in able], correlation=self.strongest.correlation, seed=self.seed
        )
        kept = [
            (k, pair) for k, pair in zip(able, made.pairs, strict=True) if pair_freedom(pair) >= LEAST_FREEDOM
        ]
        return self.strongest.of(kept, count)


def _taken(block: LayerBlock, positions: IndexArray) -> LayerBlock:
    held = np.flatnonzero(np.isin(block.rows, positions))
    return replace(block, values=block.values[held], rows=block.rows[held], nuisance=block.nuisance[held])


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
