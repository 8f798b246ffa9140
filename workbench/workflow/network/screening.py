"""The screens of an analysis: every cross-layer pair of features, within groups and with the group left in."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import combinations
from typing import TypedDict

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine import BlockPair, BlockScreen, Nuisance, SubjectDesign, screen_blocks
from workbench.engine.pairs.repeated import independent_pair, told_of_samples
from workbench.engine.pairs.screen import Correlation
from workbench.engine.pairs.subject_space import Level, SubjectSpace, by_visit, subject_space
from workbench.engine.private.module_union import screen_supported
from workbench.engine.private.private_variation import LayerBlock, RealComponent, screen_without_private
from workbench.engine.private.repeated_layers import CleanedRepeated, cleaned_repeated
from workbench.workflow.analysis_view import AnalysisView, Shared, subject_names
from workbench.workflow.reporting import Reporter

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class BlockRemoval:
    """The real components of a block, private ones among them, and the rows that their scores are on.

    ``beside`` is empty where they hold for every pair of the block. Where subjects have several samples they are
    found for each pair of blocks apart, on its rows, and ``beside`` is the other block of the pair. ``on``: whether
    the private ones were removed. ``rows`` is the block on these rows with its nuisance, ``space`` the map from its
    samples to them (None: they are its samples), ``heavy`` marks features that reached them by normal scores;
    ``steady`` is what the residuals of each row were multiplied by (less than 1: an odd one was brought back to
    size), ``odd`` the same of odd samples or subjects by name.
    """

    block: str
    beside: str
    components: tuple[RealComponent, ...]
    on: bool
    samples: tuple[str, ...]
    rows: LayerBlock
    space: SubjectSpace | None
    heavy: NDArray[np.bool_]
    steady: FloatArray
    odd: Mapping[str, float]

    @property
    def removed(self) -> tuple[RealComponent, ...]:
        """The components that were removed."""
        return tuple(one for one in self.components if one.removed) if self.on else ()


@dataclass(frozen=True, eq=False)
class RepeatedRows:
    """A pair of blocks as independent rows, as it was tested, and the map from its samples to them."""

    pair: BlockPair
    space: SubjectSpace

    @property
    def counted(self) -> tuple[str, int]:
        """What the rows are, ``changes`` within subjects or ``subjects``, and how many there are."""
        if self.space.contrasts is None:
            return "subjects", len(self.space.matrix)
        return "changes", len(self.space.contrasts)


@dataclass(frozen=True, eq=False)
class Screen:
    """One screen over the block pairs of an analysis, with what it tested.

    ``pairs`` are the values of both blocks on the samples that they share as Pearson's correlation takes them (ranks
    for Spearman's), with the nuisance columns that are still to be removed from them; ``removals`` what each block's
    real components are and which were removed, ``off`` why none were removed from a block pair (empty where they
    were); ``freedom`` the degrees of freedom of each block pair's correlations; ``rows`` the independent rows of each
    pair where subjects have several samples; ``couples`` the number of couples of shared components, ``mixed`` of
    those that carry no edge since they mix several factors.
    """

    found: BlockScreen
    pairs: tuple[BlockPair, ...]
    support: NDArray[np.str_]
    removals: tuple[BlockRemoval, ...]
    off: tuple[str, ...]
    freedom: tuple[int, ...]
    rows: tuple[RepeatedRows, ...] = ()
    couples: int = 0
    mixed: int = 0

    @property
    def repeated(self) -> bool:
        """Whether subjects have several samples."""
        return bool(self.rows)


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
    if view.settings.network.correlation == "spearman":
        pairs = tuple(
            replace(pair, x=rankdata(np.asarray(pair.x), axis=0), y=rankdata(np.asarray(pair.y), axis=0))
            for pair in pairs
        )
    off = tuple("" for _ in pairs)
    return Screen(found, pairs, np.full(found.n_edges, "pair"), (), off, _freedom(pairs))


def _repeated(
    view: AnalysisView, shared: Sequence[Shared], within: bool, reporter: Reporter, label: str
) -> Screen:
    pairs = design_pairs(view, shared, within)
    rows, components, removals, off = [], [], [], [""] * len(pairs)
    for k, (names, pair, one) in enumerate(zip(view.pairs, pairs, shared, strict=True)):
        design, level = subjects_of(view, one)
        if view.settings.network.remove_private:
            made = cleaned_between(view, names, one, within)
            rows.append(RepeatedRows(replace(made.pairs[0], name=pair.name), made.space))
            components.append(made.shared[0])
            removals += _pair_removals(view, names, one, made)
            off[k] = made.off[0]
        else:
            rows.append(
                RepeatedRows(*independent_pair(pair, design, level, view.settings.network.correlation))
            )
            components.append((np.empty((len(rows[k].space.matrix), 0)),) * 2)
    with reporter.progress(label) as progress:
        asked: Asked = {**_asked(view), "correlation": "pearson"}  # ranks are taken on the way to the rows
        found = screen_supported([one.pair for one in rows], components, **asked, progress=progress)
    spaces = [one.space for one in rows]
    screen = told_of_samples(found.screen, spaces, view.settings.network.correlation)
    freedom = tuple(space.nuisance.n_samples - space.nuisance.rank - 1 for space in spaces)
    return Screen(
        screen,
        pairs,
        found.support,
        tuple(removals),
        tuple(off),
        freedom,
        tuple(rows),
        sum(found.couples),
        sum(found.mixed),
    )


def cleaned_between(
    view: AnalysisView, names: Sequence[str], shared: Shared, within: bool
) -> CleanedRepeated:
    """Return blocks on the independent rows of the samples that they share, private variation removed.

    The pairs are those of the named blocks that are of different layers.
    """
    design, level = subjects_of(view, shared)
    columns, rows = design_columns_of(view, shared, within), np.arange(shared.n)
    blocks = [
        LayerBlock(
            name,
            view.blocks[name].layer,
            view.blocks[name].values[view.blocks[name].rows(shared.samples)],
            rows,
            columns,
        )
        for name in names
    ]
    pairs = [
        (k, other)
        for k, other in combinations(range(len(blocks)), 2)
        if blocks[k].layer != blocks[other].layer
    ]
    chosen = view.settings.network.correlation
    return cleaned_repeated(blocks, pairs, design, level, chosen, seed=view.settings.seed)


def subjects_of(view: AnalysisView, shared: Shared) -> tuple[SubjectDesign, Level]:
    """Return which samples are of one subject, and whether visits or subjects are compared."""
    assert shared.subjects is not None
    return shared.subjects, view.settings.level or "visits"


def _pair_removals(
    view: AnalysisView, names: tuple[str, str], shared: Shared, made: CleanedRepeated
) -> list[BlockRemoval]:
    """Return what was found of both blocks of a pair on its rows."""
    return [
        BlockRemoval(
            names[side],
            names[1 - side],
            made.components[side],
            not made.off[0],
            shared.samples,
            made.layers[side],
            made.space,
            made.mapped[side].heavy(),
            made.steady[side],
            _odd_subjects(subject_names(view, shared.samples), made, side),
        )
        for side in (0, 1)
    ]


def _named_odd(names: Sequence[str], steady: FloatArray) -> dict[str, float]:
    return {name: float(factor) for name, factor in zip(names, steady, strict=True) if factor < 1.0}


def _odd_subjects(subjects: Sequence[str], made: CleanedRepeated, side: int) -> dict[str, float]:
    """Return by how much the changes (or the mean) of odd subjects were shrunk on the way to the rows."""
    factors = made.mapped[side].steady
    if factors is None:
        return {}
    space = made.space
    firsts = np.array([factors[rows[0]] for rows in space.blocks])
    return _named_odd([subjects[number] for number in space.subjects], firsts)


def space_of(pair: BlockPair, design: SubjectDesign, level: Level, correlation: Correlation) -> SubjectSpace:
    """Return the map from the samples of a pair of blocks to independent rows."""
    return subject_space((pair.x, pair.y), design, np.asarray(pair.nuisance), level, correlation)


def _without_private(
    view: AnalysisView, shared: Sequence[Shared], within: bool, reporter: Reporter, label: str
) -> Screen:
    names = list(view.blocks)
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
        BlockPair(pair.name, x, y, None) for pair, (x, y) in zip(plain, result.cleaned, strict=True)
    )
    removals = tuple(
        BlockRemoval(
            name,
            "",
            components,
            any(name in pair and not off for pair, off in zip(view.pairs, result.off, strict=True)),
            view.shared((name,)).samples,
            block,
            None,
            np.zeros(block.values.shape[1], dtype=np.bool_),
            steady,
            _named_odd(view.shared((name,)).samples, steady),
        )
        for name, components, block, steady in zip(
            names, result.components, blocks, result.steady, strict=True
        )
    )
    return Screen(
        result.screen,
        pairs,
        result.support,
        removals,
        result.off,
        _freedom(plain),
        couples=sum(result.couples),
        mixed=sum(result.mixed),
    )


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
