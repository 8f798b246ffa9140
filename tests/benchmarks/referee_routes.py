"""One study through three routes: by hand, with private variation removed, and by an oracle that knows it."""

from __future__ import annotations

from dataclasses import asdict, dataclass, replace

import numpy as np
from referee_families import Family
from scipy import stats
from simulated import Block, Study, design_matrix, logs, simulate
from simulated.sheet import indicators

from workbench.engine.nuisance import Nuisance
from workbench.engine.pairs.screen import BlockScreen, screen_blocks
from workbench.engine.private.module_union import screen_supported
from workbench.engine.private.private_variation import (
    LayerBlock,
    PrivateScreen,
    pairs_without_private,
    screen_cleaned,
)
from workbench.engine.private.repeated_layers import cleaned_repeated
from workbench.engine.subjects import SubjectDesign, differences, subject_means

Keys = np.ndarray

NEAR = 0.05
"""By hand, pairs of larger p are not ranked."""


@dataclass(frozen=True)
class Outcome:
    """What the routes found in one study; recall is NaN where nothing is true.

    ``hand_cut`` is the recall of the by-hand ranking at the largest cut whose share of false pairs does not
    pass ``max(0.05, share of the removal's route)``. ``covered`` counts intervals of the removal's edges that hold the
    population correlation (NaN where it is not known); ``alone_edges`` and ``alone_false`` are those of the pairs'
    own tests at the whole rate, without modules, and ``module_edges`` and ``module_false`` those of the edges that
    their module alone carries; ``lost`` and ``left`` count shared components removed
    and private ones kept (a component is shared when the modules explain at least half of its scores).
    """

    family: str
    seed: int
    true: int
    hand_edges: int
    hand_false: int
    hand_cut: float
    edges: int
    false: int
    alone_edges: int
    alone_false: int
    module_edges: int
    module_false: int
    oracle_edges: int
    oracle_false: int
    intervals: int
    covered: int
    real: int
    removed: int
    lost: int
    left: int
    off: int

    def row(self) -> list[str]:
        """Return the fields as text."""
        return [f"{value:.6g}" if isinstance(value, float) else str(value) for value in asdict(self).values()]


@dataclass(frozen=True)
class Arrays:
    """A study as the screen takes it, and each block's true private scores and modules on its rows."""

    blocks: list[LayerBlock]
    private: list[np.ndarray]
    modules: list[np.ndarray]
    shared: np.ndarray


def run_study(name: str, family: Family, seed: int) -> Outcome:
    """Return what the routes found in the study of a seed."""
    study = simulate(family.design, seed)
    arrays = study_arrays(study, family)
    found, alone = _product(study, arrays, family)
    truth = _true_keys(study)
    ours, own = _edge_keys(study, found.screen), _edge_keys(study, alone)
    carried = _edge_keys(study, found.screen, found.support == "module")
    hand, hand_p = _route(study, arrays, family, know_private=False)
    oracle, _ = _route(study, arrays, family, know_private=True)
    false = _false(ours, truth)
    limit = max(0.05, false / max(ours.size, 1))
    intervals, covered = _coverage(study, found)
    return Outcome(
        name,
        seed,
        truth.size,
        hand.size,
        _false(hand, truth),
        _cut(*hand_p, truth, limit),
        ours.size,
        false,
        own.size,
        _false(own, truth),
        carried.size,
        _false(carried, truth),
        oracle.size,
        _false(oracle, truth),
        intervals,
        covered,
        *_components(found, arrays),
        sum(bool(reason) for reason in found.off),
    )


def _product(study: Study, arrays: Arrays, family: Family) -> tuple[PrivateScreen, BlockScreen]:
    """Return what the program does with a study of this kind, and what it would find without modules."""
    pairs = study.design.block_pairs()
    if family.level != "visits":
        made = pairs_without_private(arrays.blocks, pairs, correlation=family.correlation, seed=study.seed)
        found = screen_cleaned(made, correlation=family.correlation)
        return found, screen_blocks(made.pairs, correlation=family.correlation)
    return _between_visits(study, arrays, family)


def _between_visits(study: Study, arrays: Arrays, family: Family) -> tuple[PrivateScreen, BlockScreen]:
    """Return what the program finds between the visits of subjects; the scores of components are by sample."""
    # The visits' common course and the subjects' own level are removed without being named.
    known = design_matrix(study.samples.drop(columns=["visit", "group"]), *study.blocks)
    blocks = [replace(block, nuisance=known) for block in arrays.blocks]
    made = cleaned_repeated(
        blocks, study.design.block_pairs(), _subjects(study), "visits", family.correlation, seed=study.seed
    )
    found = screen_supported(made.pairs, made.shared)
    components = tuple(
        tuple(replace(one, scores=made.space.on_samples(one.scores[:, None])[:, 0]) for one in block)
        for block in made.components
    )
    screen = PrivateScreen(found.screen, found.support, components, made.off, (), found.couples, found.mixed)
    return screen, screen_blocks(made.pairs)


def _edge_keys(study: Study, screen: BlockScreen, chosen: np.ndarray | None = None) -> Keys:
    """Return the keys of a screen's edges, or of the chosen ones, sorted."""
    take = np.ones(screen.n_edges, dtype=bool) if chosen is None else chosen
    edges, which = np.column_stack([screen.i, screen.j])[take], screen.pair_index[take]
    return np.sort(_keys(study, [edges[which == k] for k in range(len(screen.names))]))


def _false(edges: Keys, truth: Keys) -> int:
    return int(np.count_nonzero(~np.isin(edges, truth)))


def _subjects(study: Study) -> SubjectDesign:
    return SubjectDesign.of(study.samples["subject"].to_numpy(), study.samples["visit"].to_numpy())


def study_arrays(study: Study, family: Family) -> Arrays:
    """Return the blocks on a log scale, on the rows of the family's level."""
    names = [block.name for block in study.design.blocks]
    blocks, private = [], []
    for block in study.design.blocks:
        table = logs(study, block)
        rows = study.samples.index.get_indexer(table.index)
        known = design_matrix(study.samples.loc[table.index], *_assays(study, block, names))
        scores = study.truth.private[block.name].loc[table.index].to_numpy()
        x, known, scores = (_at_level(study, family, part) for part in (table.to_numpy(), known, scores))
        rows = rows if len(x) == len(table) else np.arange(len(x))
        if family.level == "visits":
            known = np.hstack([known, indicators(study.samples["subject"])])
        blocks.append(LayerBlock(block.name, block.layer, x, rows, known))
        private.append(scores)
    shared = _at_level(study, family, study.truth.shared.to_numpy())
    return Arrays(blocks, private, [study.truth.modules[name] for name in names], shared)


def _assays(study: Study, block: Block, names: list[str]) -> list[str]:
    """Return the assays whose run order is nuisance: the block's own; with pairs of rows all of them."""
    return names if study.design.visits > 1 else [block.name]


def _at_level(study: Study, family: Family, x: np.ndarray) -> np.ndarray:
    if family.level in ("samples", "visits"):
        return x
    design = _subjects(study)
    return differences(design, x) if family.level == "changes" else subject_means(design, x)


def _route(
    study: Study, arrays: Arrays, family: Family, *, know_private: bool
) -> tuple[Keys, tuple[Keys, np.ndarray]]:
    """Return the pairs that pass Benjamini & Hochberg 1995 over all pairs, and all near ones with their p."""
    keys, p_values, tests = [], [], 0
    start = 0
    for a, b in study.design.block_pairs():
        x, y, freedom = _both(arrays, family, a, b, know_private)
        r = np.clip(x.T @ y, -1.0, 1.0)
        tests += int(np.isfinite(r).sum())
        near = np.flatnonzero(np.abs(r) >= _critical(freedom))
        near_r = r.ravel()[near]
        t = np.abs(near_r) * np.sqrt(freedom / np.maximum(1.0 - near_r**2, 1e-300))
        keys.append(near + start)
        p_values.append(2 * stats.t.sf(t, freedom))
        start += r.size
    every, p = np.concatenate(keys), np.concatenate(p_values)
    order = np.argsort(p, kind="stable")
    every, p = every[order], p[order]
    passed = np.flatnonzero(p <= 0.05 * np.arange(1, p.size + 1) / tests)
    return every[: passed[-1] + 1] if passed.size else every[:0], (every, p)


def _critical(freedom: int) -> float:
    t = stats.t.isf(NEAR / 2, freedom)
    return float(t / np.sqrt(freedom + t**2))


def _both(
    arrays: Arrays, family: Family, a: int, b: int, know_private: bool
) -> tuple[np.ndarray, np.ndarray, int]:
    """Return unit residuals of two blocks on the rows that they share, and degrees of freedom."""
    one, other = arrays.blocks[a], arrays.blocks[b]
    _, mine, theirs = np.intersect1d(one.rows, other.rows, return_indices=True)
    known = Nuisance.of(np.hstack([one.nuisance[mine], other.nuisance[theirs]]), mine.size)
    sides = []
    for block, rows, scores in ((one, mine, arrays.private[a]), (other, theirs, arrays.private[b])):
        x = block.values[rows]
        if family.correlation == "spearman":
            x = stats.rankdata(x, axis=0)
        own = Nuisance.of(np.hstack([known.basis[:, 1:], scores[rows]]), rows.size) if know_private else known
        rest = own.residuals(x)
        length = np.linalg.norm(rest, axis=0)
        sides.append(rest / np.where(length > 1e-8 * np.linalg.norm(x, axis=0), length, np.nan))
    return sides[0], sides[1], mine.size - known.rank - 1


def _true_keys(study: Study) -> Keys:
    names = [block.name for block in study.design.blocks]
    return np.sort(
        _keys(study, [study.truth.pairs[names[a], names[b]] for a, b in study.design.block_pairs()])
    )


def _keys(study: Study, pairs: list[np.ndarray]) -> Keys:
    """Return one number for each pair of features, over all pairs of blocks."""
    start, keys = 0, []
    for (a, b), rows in zip(study.design.block_pairs(), pairs, strict=True):
        p, q = study.design.blocks[a].features, study.design.blocks[b].features
        keys.append(start + rows[:, 0] * q + rows[:, 1])
        start += p * q
    return np.concatenate(keys).astype(np.int64)


def _cut(ranked: Keys, p: np.ndarray, truth: Keys, limit: float) -> float:
    """Return the recall at the largest cut of the ranking whose share of false pairs stays within the limit."""
    if not truth.size:
        return float("nan")
    del p
    right = np.cumsum(np.isin(ranked, truth))
    number = np.arange(1, ranked.size + 1)
    within = np.flatnonzero(number - right <= limit * number)
    return float(right[within[-1]] / truth.size) if within.size else 0.0


def _coverage(study: Study, found: PrivateScreen) -> tuple[int, int]:
    """Return the number of intervals, and how many hold the population correlation once private factors are gone.

    Known for plain numbers: with loadings a and b on one module and noise of unit variance it is
    ``ab / sqrt((1 + a^2)(1 + b^2))``.
    """
    if any(block.values != "continuous" or block.dilution for block in study.design.blocks):
        return 0, 0
    first, second = (study.truth.loadings[block.name] for block in study.design.blocks)
    a, b = first[found.screen.i], second[found.screen.j]
    r = np.sum(a * b, axis=1) / np.sqrt((1 + np.sum(a**2, axis=1)) * (1 + np.sum(b**2, axis=1)))
    inside = (found.screen.r_low <= r) & (r <= found.screen.r_high)
    return inside.size, int(inside.sum())


def _components(found: PrivateScreen, arrays: Arrays) -> tuple[int, int, int, int]:
    """Return numbers of real components, removed ones, shared ones removed and private ones kept."""
    real = removed = lost = left = 0
    for block, source, modules in zip(found.components, arrays.blocks, arrays.modules, strict=True):
        known = Nuisance.of(source.nuisance, source.nuisance.shape[0])
        has = arrays.shared.shape[1] and (modules >= 0).any()
        shared = known.residuals(arrays.shared[source.rows]) if has else np.empty((source.rows.size, 0))
        basis = np.linalg.qr(shared)[0]
        for one in block:
            is_shared = float(np.sum((basis.T @ one.scores) ** 2)) >= 0.5
            real += 1
            removed += one.removed
            lost += one.removed and is_shared
            left += not one.removed and not is_shared
    return real, removed, lost, left
