"""pathways.tsv and coherence.tsv: the sets of an analysis against its communities and its edges."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import asdict, dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import benjamini_hochberg
from workbench.intake.faults import counted
from workbench.pathways import (
    Coherence,
    LayerTest,
    PermutedCounts,
    SetMembers,
    community_score,
    layer_tests,
    permutation_p,
    permutations_allowed,
    permuted_counts,
    rewiring_p,
    stouffer,
)
from workbench.workflow.followup.residual_blocks import LEAST_ROWS, ResidualViews
from workbench.workflow.reporting import Reporter

FloatArray = NDArray[np.float64]

PERMUTATIONS = 999
CELL_BUDGET = 400_000_000
"""Correlations that the permutations of all communities may take together; fewer for large studies, 199 at least."""

FEWEST_PERMUTATIONS = 199
ALL_LAYERS = "all layers"
FEATURES_NAMED = 20
HOLDS = 0.05
PATHWAY_COLUMNS = (
    *("community", "layer", "set", "name", "in_set", "tested", "in_community", "found", "expected", "p", "q"),
    *("p_permutation", "holds", "weight", "features"),
)


@dataclass(frozen=True, eq=False)
class Tested:
    """A community in a layer with both of its p's; ``permuted`` is None where samples could not be permuted."""

    test: LayerTest
    permuted: PermutedCounts | None


def tested_sets(
    views: ResidualViews, features: pd.DataFrame, members: SetMembers, reporter: Reporter
) -> list[Tested]:
    """Return every community tested in every layer, with the permutation p beside the hypergeometric one."""
    layers = features["layer"].tolist()
    communities = [int(number) if number == number else None for number in _numbers(features)]
    tests = layer_tests(members.matrix, layers, communities)
    cells = sum(test.universe.size for test in tests)
    permutations = int(np.clip(CELL_BUDGET // max(cells, 1), FEWEST_PERMUTATIONS, PERMUTATIONS))
    found = []
    with reporter.progress("sets, samples permuted") as progress:
        for number, test in enumerate(tests):
            found.append(Tested(test, _permuted(views, features, members, test, permutations)))
            if progress is not None:
                progress(number + 1, len(tests))
    return found


def _numbers(features: pd.DataFrame) -> list[float]:
    return pd.to_numeric(features["community"], errors="coerce").astype(float).tolist()


def _permuted(
    views: ResidualViews, features: pd.DataFrame, members: SetMembers, test: LayerTest, permutations: int
) -> PermutedCounts | None:
    """Permute one layer's rows against the community's score from the other layers; None without such a score."""
    inside = np.array([number == test.community for number in _numbers(features)])
    others = np.flatnonzero(inside & (features["layer"] != test.layer).to_numpy())
    blocks = features["block"].to_numpy()
    own = list(dict.fromkeys(blocks[test.universe]))
    reached = list(dict.fromkeys(blocks[others]))
    if not reached:
        return None
    found = views.of([*own, *reached])
    if found.rows < LEAST_ROWS:
        return None
    place = block_places(views, features)
    there = np.column_stack([found.values[blocks[row]][:, place[row]] for row in others])
    here = np.empty((found.rows, test.universe.size))
    for block in own:
        mine = blocks[test.universe] == block
        here[:, mine] = found.values[block][:, place[test.universe[mine]]]
    layer = views.view.layers.index(test.layer)
    return permuted_counts(
        community_score(there),
        here,
        members.matrix[test.universe][:, test.sets],
        test.drawn.size,
        permutations=permutations,
        seed=np.random.SeedSequence(views.view.settings.seed, spawn_key=(test.community, layer)),
    )


def block_places(views: ResidualViews, features: pd.DataFrame) -> NDArray[np.intp]:
    """Return the column of each row of the features table in its block."""
    place = {
        (name, feature): column
        for name, block in views.view.blocks.items()
        for column, feature in enumerate(block.features)
    }
    keys = zip(features["block"], features["feature"], strict=True)
    return np.array([place[key] for key in keys], dtype=np.intp)


def pathways_table(
    tested: Sequence[Tested], features: pd.DataFrame, members: SetMembers, fdr: float
) -> pd.DataFrame:
    """Return pathways.tsv: a row for each community, layer and set with a feature found, best evidence first.

    ``q`` is over all tests, those without a feature found among them, the rows of joined layers by themselves.
    ``holds``: ``q`` is at or under ``fdr`` and ``p_permutation`` at or under 0.05.
    """
    single = pd.DataFrame(list(_rows(tested, features, members)), columns=pd.Index(_COLUMNS))
    joined = pd.DataFrame(list(_joined_rows(tested, members)), columns=pd.Index(_COLUMNS))
    for table in (single, joined):
        table["q"] = benjamini_hochberg(table["p"].to_numpy(dtype=float)) if len(table) else np.nan
    parts = [table for table in (single, joined) if len(table)]
    table = pd.concat(parts, ignore_index=True) if parts else single
    table["holds"] = (table["q"] <= fdr) & (table["p_permutation"] <= HOLDS)
    table = table[table["found"] > 0]
    order = ["holds", "q", "p_permutation", "p", "community", "layer", "set"]
    table = table.sort_values(order, ascending=[False, *[True] * 6], kind="stable")
    return table[list(PATHWAY_COLUMNS)].reset_index(drop=True)


_COLUMNS = [column for column in PATHWAY_COLUMNS if column not in ("q", "holds")]


def _rows(
    tested: Sequence[Tested], features: pd.DataFrame, members: SetMembers
) -> Iterator[tuple[object, ...]]:
    labels = features["label" if "label" in features else "feature"].astype(str).to_numpy()
    for one in tested:
        test = one.test
        held = members.matrix[test.drawn].tocsc()
        for place, column in enumerate(test.sets.tolist()):
            rows = test.drawn[np.sort(held.indices[held.indptr[column] : held.indptr[column + 1]])]
            yield (
                *(test.community, test.layer, members.table.sets[column].id, members.table.sets[column].name),
                *(int(test.sizes[place]), test.universe.size, test.drawn.size, int(test.counts[place])),
                *(float(test.expected[place]), float(test.p[place])),
                float(one.permuted.p[place]) if one.permuted is not None else np.nan,
                test.weight,
                _named(labels[rows].tolist()),
            )


def _named(labels: list[str]) -> str:
    shown = "; ".join(labels[:FEATURES_NAMED])
    return f"{shown}; and {len(labels) - FEATURES_NAMED} more" if len(labels) > FEATURES_NAMED else shown


def _joined_rows(tested: Sequence[Tested], members: SetMembers) -> Iterator[tuple[object, ...]]:
    """Yield the sets that two layers and more test in one community, their p's joined by Stouffer.

    Hypergeometric p's go in as mid-p's; permutation p's as they are, just under 1 where nothing was found.
    """
    for community in dict.fromkeys(one.test.community for one in tested):
        mine = [one for one in tested if one.test.community == community]
        if len(mine) < 2:
            continue
        weights = np.array([one.test.weight for one in mine])
        p, p_permutation = np.full((2, len(mine), len(members.table.sets)), np.nan)
        for row, one in enumerate(mine):
            p[row, one.test.sets] = one.test.p_mid
            if one.permuted is not None:
                least = 1.0 / (2.0 * (one.permuted.permutations + 1.0))
                p_permutation[row, one.test.sets] = np.minimum(one.permuted.p, 1.0 - least)
        both = np.flatnonzero((~np.isnan(p)).sum(axis=0) > 1)
        joined = stouffer(p[:, both], weights)
        permuted = stouffer(p_permutation[:, both], weights)
        whole = (~np.isnan(p_permutation[:, both])).sum(axis=0) == (~np.isnan(p[:, both])).sum(axis=0)
        for place, column in enumerate(both.tolist()):
            held = [
                (one.test, int(np.flatnonzero(one.test.sets == column)[0]))
                for one in mine
                if column in one.test.sets
            ]
            yield (
                *(community, ALL_LAYERS, members.table.sets[column].id, members.table.sets[column].name),
                sum(int(test.sizes[k]) for test, k in held),
                sum(test.universe.size for test, _ in held),
                sum(test.drawn.size for test, _ in held),
                sum(int(test.counts[k]) for test, k in held),
                sum(float(test.expected[k]) for test, k in held),
                float(joined[place]),
                float(permuted[place]) if whole[place] else np.nan,
                np.nan,
                "",
            )


def coherence_of(
    views: ResidualViews,
    features: pd.DataFrame,
    ends: NDArray[np.intp],
    members: SetMembers,
    reporter: Reporter,
) -> list[Coherence]:
    """Return the coherence of the edges of each two blocks."""
    found = []
    with reporter.progress("coherence of the edges") as progress:
        for number, pair in enumerate(views.view.pairs):
            found.append(_coherence(views, features, ends, members, pair, number))
            if progress is not None:
                progress(number + 1, len(views.view.pairs))
    return found


def _coherence(
    views: ResidualViews,
    features: pd.DataFrame,
    ends: NDArray[np.intp],
    members: SetMembers,
    pair: tuple[str, str],
    number: int,
) -> Coherence:
    blocks, in_a_set = features["block"].to_numpy(), np.asarray(members.matrix.sum(axis=1)).ravel() > 0
    sides = [np.flatnonzero((blocks == name) & in_a_set) for name in pair]
    place = np.full(len(features), -1)
    for side in sides:
        place[side] = np.arange(side.size)
    here = (blocks[ends] == np.array(pair, dtype=object)).all(axis=1) & in_a_set[ends].all(axis=1)
    pairs = place[ends[here]]
    reason = _why_not_asked(members, pair, sides) or ("" if len(pairs) else "no edge has both ends in a set")
    if reason:
        return Coherence(pair, len(pairs), 0, None, None, None, None, None, 0, reason)
    share = np.asarray(
        (members.matrix[sides[0]].astype(int) @ members.matrix[sides[1]].T.astype(int)).todense() > 0
    )
    seeds = [
        np.random.SeedSequence(views.view.settings.seed, spawn_key=(1, number, step)) for step in range(2)
    ]
    sharing, rewired, p_rewired = rewiring_p(pairs, share, seed=seeds[0])
    allowed, blocked = permutations_allowed(share.size), views.of(pair)
    if not allowed or blocked.rows < LEAST_ROWS:
        reason = (
            f"{share.size:,} pairs are too many to permute samples"
            if not allowed
            else f"{blocked.rows} rows without the design are too few to permute"
        )
        return Coherence(pair, len(pairs), sharing, rewired, p_rewired, None, None, None, 0, reason)
    columns = block_places(views, features)
    x, y = (blocked.values[name][:, columns[side]] for name, side in zip(pair, sides, strict=True))
    strongest, permuted, p = permutation_p(x, y, len(pairs), share, permutations=allowed, seed=seeds[1])
    return Coherence(pair, len(pairs), sharing, rewired, p_rewired, strongest, permuted, p, allowed, "")


def _why_not_asked(members: SetMembers, pair: tuple[str, str], sides: Sequence[NDArray[np.intp]]) -> str:
    """Return why no edge of two blocks could join features of one set; empty where one could."""
    held = [np.asarray(members.matrix[side].sum(axis=0)).ravel() > 0 for side in sides]
    for name, here in zip(pair, held, strict=True):
        if not here.any():
            return (
                f"the sets hold no feature of {name}: whether edges join members of one set cannot be asked"
            )
    if not (held[0] & held[1]).any():
        return "no set holds features of both: whether edges join members of one set cannot be asked"
    return ""


def coherence_table(found: Sequence[Coherence]) -> pd.DataFrame:
    """Return coherence.tsv."""
    rows = []
    for one in found:
        record = asdict(one)
        source, target = record.pop("blocks")
        rows.append({"source_block": source, "target_block": target, **record})
    return pd.DataFrame(rows)


def coherence_sentences(found: Sequence[Coherence]) -> list[str]:
    """Return the coherence in words."""
    lines = []
    for one in found:
        if one.p_rewired is None:
            lines.append(f"{one.blocks[0]} x {one.blocks[1]}: {one.reason}")
            continue
        told = (
            f"{one.blocks[0]} x {one.blocks[1]}: {counted(one.edges, 'edge')} with both ends in a set, {one.sharing} "
            f"of them in the same one; {one.expected_rewired:.1f} once edges are rewired at random (p = "
            f"{one.p_rewired:.2g})"
        )
        if one.p_permuted is not None:
            told += f", {one.expected_permuted:.1f} once samples are permuted (p = {one.p_permuted:.2g})"
        lines.append(told + (f"; {one.reason}" if one.reason else ""))
    return lines
