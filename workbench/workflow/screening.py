"""The screens of an analysis: every cross-layer pair of features, within groups and with the group left in."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypedDict

import numpy as np
from numpy.typing import NDArray

from workbench.engine import BlockPair, BlockScreen, Nuisance, SubjectDesign, screen_blocks
from workbench.engine.private_variation import LayerBlock, RealComponent, screen_without_private
from workbench.engine.repeated import Level, SubjectSpace, by_visit, screen_repeated, subject_space
from workbench.engine.screen import Correlation
from workbench.workflow.analysis_view import AnalysisView, Shared
from workbench.workflow.reporting import Reporter

FloatArray = NDArray[np.float64]

REPEATED = (
    "private variation is not removed where subjects have several samples: their samples are no independent rows "
    "to find it on"
)


@dataclass(frozen=True, eq=False)
class Screen:
    """One screen over the block pairs of an analysis, with what it tested.

    ``pairs`` are the values of both blocks on the samples that they share, with the nuisance columns that are still
    to be removed from them; ``components`` the real components of each block, private ones among them, ``off`` why
    none were removed from a block pair (empty where they were); ``freedom`` the degrees of freedom of each block
    pair's correlations; ``repeated`` whether subjects have several samples.
    """

    found: BlockScreen
    pairs: tuple[BlockPair, ...]
    support: NDArray[np.str_]
    components: dict[str, tuple[RealComponent, ...]]
    off: tuple[str, ...]
    freedom: tuple[int, ...]
    repeated: bool


@dataclass(frozen=True, eq=False)
class Screens:
    """The screens of an analysis over its block pairs.

    ``chosen`` is the one whose pairs are edges, ``total`` leaves the group in, ``within`` removes it
    (None, as ``total`` and ``chosen`` are the same, without a group).
    """

    shared: tuple[Shared, ...]
    chosen: Screen
    total: Screen
    within: Screen | None


def screen_analysis(view: AnalysisView, reporter: Reporter) -> Screens:
    """Screen every cross-layer pair of features, within groups and in total where there is a group."""
    shared = tuple(view.shared(pair) for pair in view.pairs)
    grouped = bool(view.factors)
    label = "pairs, group left in" if grouped else "pairs"
    total = screen_pairs_of(view, shared, within=False, reporter=reporter, label=label)
    if not grouped:
        return Screens(shared, total, total, None)
    within = screen_pairs_of(view, shared, within=True, reporter=reporter, label="pairs within groups")
    chosen = within if view.settings.network.select == "within" else total
    return Screens(shared, chosen, total, within)


def screen_pairs_of(
    view: AnalysisView, shared: Sequence[Shared], *, within: bool, reporter: Reporter, label: str
) -> Screen:
    """Run one screen: with the group removed (``within``) or left in."""
    if any(is_repeated(one) for one in shared):
        return _repeated(view, shared, within, reporter, label)
    if view.settings.network.remove_private:
        return _without_private(view, shared, within, reporter, label)
    return _plain(view, shared, within, reporter, label)


def is_repeated(shared: Shared) -> bool:
    """Return whether some subject has several of the samples."""
    return shared.subjects is not None and shared.subjects.kind != "single"


def design_columns_of(view: AnalysisView, shared: Shared, within: bool) -> FloatArray:
    """Return the columns that a screen removes from both ends: the nuisance, and the group within groups.

    Between visits a group enters by visit: subjects that stay in their group differ in their course.
    """
    if not within:
        return shared.nuisance
    columns = shared.group_columns
    if is_repeated(shared) and view.settings.level == "visits" and shared.subjects is not None:
        columns = by_visit(shared.subjects, columns)
    return np.hstack([shared.nuisance, columns])


def design_pairs(view: AnalysisView, shared: Sequence[Shared], within: bool) -> tuple[BlockPair, ...]:
    """Return each pair of blocks on the samples that it shares, with the columns that a screen removes."""
    return tuple(
        BlockPair(
            f"{first} x {second}",
            view.blocks[first].values[view.blocks[first].rows(one.samples)],
            view.blocks[second].values[view.blocks[second].rows(one.samples)],
            design_columns_of(view, one, within),
        )
        for (first, second), one in zip(view.pairs, shared, strict=True)
    )


def _plain(
    view: AnalysisView, shared: Sequence[Shared], within: bool, reporter: Reporter, label: str
) -> Screen:
    pairs = design_pairs(view, shared, within)
    with reporter.progress(label) as progress:
        found = screen_blocks(
            pairs,
            **_asked(view),
            progress=progress,
        )
    off = tuple("" for _ in pairs)
    return Screen(found, pairs, np.full(found.n_edges, "pair"), {}, off, _freedom(pairs), False)


def _repeated(
    view: AnalysisView, shared: Sequence[Shared], within: bool, reporter: Reporter, label: str
) -> Screen:
    settings, pairs = view.settings.network, design_pairs(view, shared, within)
    designs = [one.subjects for one in shared if one.subjects is not None]
    level = view.settings.level or "visits"
    with reporter.progress(label) as progress:
        found = screen_repeated(
            pairs,
            designs,
            level,
            **_asked(view),
            progress=progress,
        )
    off = tuple(REPEATED if settings.remove_private else "" for _ in pairs)
    spaces = [
        space_of(pair, one, level, settings.correlation) for pair, one in zip(pairs, designs, strict=True)
    ]
    freedom = tuple(space.nuisance.n_samples - space.nuisance.rank - 1 for space in spaces)
    return Screen(found, pairs, np.full(found.n_edges, "pair"), {}, off, freedom, True)


def space_of(pair: BlockPair, design: SubjectDesign, level: Level, correlation: Correlation) -> SubjectSpace:
    """Return the map from the samples of a pair of blocks to independent rows."""
    return subject_space((pair.x, pair.y), design, np.asarray(pair.nuisance), level, correlation)


def _without_private(
    view: AnalysisView, shared: Sequence[Shared], within: bool, reporter: Reporter, label: str
) -> Screen:
    settings, names = view.settings.network, list(view.blocks)
    blocks = [layer_block(view, name, within) for name in names]
    places = [(names.index(first), names.index(second)) for first, second in view.pairs]
    with reporter.progress(label) as progress:
        result = screen_without_private(
            blocks,
            places,
            **_asked(view),
            seed=view.settings.seed,
            progress=progress,
        )
    plain = design_pairs(view, shared, within)
    pairs = tuple(
        pair if settings.correlation == "spearman" else BlockPair(pair.name, x, y, None)
        for pair, (x, y) in zip(plain, result.cleaned, strict=True)
    )
    components = dict(zip(names, result.components, strict=True))
    return Screen(result.screen, pairs, result.support, components, result.off, _freedom(plain), False)


class Asked(TypedDict):
    """What every screen is asked for."""

    fdr: float
    correlation: Correlation
    minimum_r: float
    maximum_edges: int


def _asked(view: AnalysisView) -> Asked:
    chosen = view.settings.network
    return {
        "fdr": chosen.fdr,
        "correlation": chosen.correlation,
        "minimum_r": chosen.minimum_r,
        "maximum_edges": chosen.maximum_edges,
    }


def _freedom(pairs: Sequence[BlockPair]) -> tuple[int, ...]:
    """Return the degrees of freedom of each pair's correlations: removal that looks at one block alone costs none."""
    return tuple(
        int(pair.x.shape[0]) - Nuisance.of(np.asarray(pair.nuisance), int(pair.x.shape[0])).rank - 1
        for pair in pairs
    )


def layer_block(view: AnalysisView, name: str, within: bool) -> LayerBlock:
    """Return a block on the samples with a known design, with its own nuisance (and the group)."""
    block, own = view.blocks[name], view.shared((name,))
    place = {str(sample): row for row, sample in enumerate(view.sheet.index)}
    return LayerBlock(
        name,
        block.layer,
        block.values[block.rows(own.samples)],
        np.array([place[sample] for sample in own.samples], dtype=np.intp),
        design_columns_of(view, own, within),
    )
