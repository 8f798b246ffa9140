"""The cross-layer pairs of an analysis: both screens, the rules of selection, and the tables of pairs."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import (
    BlockPair,
    BlockScreen,
    Nuisance,
    PairFigures,
    edge_evidence,
    fisher_interval,
    screen_blocks,
)
from workbench.errors import InputError
from workbench.workflow.analysis_view import AnalysisView, Shared
from workbench.workflow.reporting import Reporter

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
ENDS = ["source", "source_block", "target", "target_block"]
GROUP_BOUND = 0.5


@dataclass(frozen=True, eq=False)
class Screens:
    """The screens of an analysis over its block pairs.

    ``chosen`` is the one whose pairs are edges, ``total`` leaves the group in, ``within`` removes it
    (None, as ``total`` and ``chosen`` are the same, without a group).
    """

    shared: tuple[Shared, ...]
    chosen: BlockScreen
    total: BlockScreen
    within: BlockScreen | None


@dataclass(frozen=True, eq=False)
class Pairs:
    """Chosen pairs: position of the block pair and of both features."""

    pair: IndexArray
    i: IndexArray
    j: IndexArray


def screen_analysis(view: AnalysisView, reporter: Reporter) -> Screens:
    """Screen every cross-layer pair of features, within groups and in total where there is a group."""
    shared = tuple(view.shared(pair) for pair in view.pairs)
    _refuse_repeated(view, shared)
    grouped = bool(view.factors)
    total = _screen(
        view, shared, lambda one: one.nuisance, reporter, "pairs, group left in" if grouped else "pairs"
    )
    if not grouped:
        return Screens(shared, total, total, None)
    within = _screen(view, shared, lambda one: one.within, reporter, "pairs within groups")
    chosen = within if view.settings.network.select == "within" else total
    return Screens(shared, chosen, total, within)


def _refuse_repeated(view: AnalysisView, shared: tuple[Shared, ...]) -> None:
    for one in shared:
        if one.subjects is not None and one.subjects.kind != "single":
            raise InputError(f"analysis '{view.name}': the screen of pairs takes one sample of each subject")


def _screen(
    view: AnalysisView,
    shared: tuple[Shared, ...],
    nuisance: Callable[[Shared], FloatArray],
    reporter: Reporter,
    label: str,
) -> BlockScreen:
    settings = view.settings.network
    pairs = [
        BlockPair(
            f"{first} x {second}",
            view.blocks[first].values[view.blocks[first].rows(one.samples)],
            view.blocks[second].values[view.blocks[second].rows(one.samples)],
            nuisance(one),
        )
        for (first, second), one in zip(view.pairs, shared, strict=True)
    ]
    with reporter.progress(label) as progress:
        return screen_blocks(
            pairs,
            fdr=settings.fdr,
            correlation=settings.correlation,
            minimum_r=settings.minimum_r,
            maximum_edges=settings.maximum_edges,
            progress=progress,
        )


def edges_table(view: AnalysisView, screens: Screens) -> pd.DataFrame:
    """Return the edges, strongest evidence first, with all that speaks for and against each."""
    screen = screens.chosen
    pairs = Pairs(screen.pair_index, screen.i, screen.j)
    table = _ends(view, pairs)
    for column in ("n", "r", "r_low", "r_high", "p", "q", "q_block"):
        table[column] = getattr(screen, column)
    total = screens.total.lookup(pairs.pair, pairs.i, pairs.j)
    grouped = screens.within is not None
    table["r_total"] = total.r if grouped else np.nan
    table["q_total"] = total.q if grouped else np.nan
    table["basis"] = ""
    if screens.within is not None:
        found = screens.within.lookup(pairs.pair, pairs.i, pairs.j)
        table["basis"] = basis_of(view, found, table["r_total"].to_numpy(), pairs, screens)
        if view.settings.network.select == "total":
            table["r_within"], table["q_within"] = found.r, found.q
    for column, values in _evidence(view, screens, pairs).items():
        table[column] = values
    return table


def group_pairs_table(view: AnalysisView, screens: Screens) -> pd.DataFrame:
    """Return the pairs that pass the total screen alone, with what they may rest on."""
    if screens.within is None:
        empty = Pairs(*(np.zeros(0, dtype=np.intp) for _ in range(3)))
        return _ends(view, empty).assign(
            n=[], r_total=[], p_total=[], q_total=[], r_within=[], q_within=[], basis=[]
        )
    total = screens.total
    every = Pairs(total.pair_index, total.i, total.j)
    inside = screens.within.lookup(every.pair, every.i, every.j)
    fdr = view.settings.network.fdr
    keep = ~((inside.q <= fdr) & (inside.q_block <= fdr))
    alone = Pairs(every.pair[keep], every.i[keep], every.j[keep])
    found = screens.within.lookup(alone.pair, alone.i, alone.j)
    table = _ends(view, alone)
    table["n"] = total.n[keep]
    table["r_total"], table["p_total"], table["q_total"] = total.r[keep], total.p[keep], total.q[keep]
    low, high = _interval(found.r, alone, screens)
    table["r_within"], table["r_within_low"], table["r_within_high"] = found.r, low, high
    table["q_within"] = found.q
    table["basis"] = basis_of(view, found, total.r[keep], alone, screens)
    return table


def basis_of(
    view: AnalysisView, within: PairFigures, r_total: FloatArray, pairs: Pairs, screens: Screens
) -> NDArray[np.str_]:
    """Return what each pair rests on: ``within``, ``group`` or ``unclear``.

    ``within``: it passes the screen within groups too.  ``group``: the 95 % interval of the correlation
    within groups lies inside plus or minus half of the total one.  Otherwise ``unclear``: no evidence of
    the one or the other.
    """
    fdr = view.settings.network.fdr
    passes = (within.q <= fdr) & (within.q_block <= fdr)
    low, high = _interval(within.r, pairs, screens)
    bound = GROUP_BOUND * np.abs(r_total)
    by_group = (low > -bound) & (high < bound)
    return np.where(passes, "within", np.where(by_group, "group", "unclear"))


def _interval(r: FloatArray, pairs: Pairs, screens: Screens) -> tuple[FloatArray, FloatArray]:
    """Return the unadjusted 95 % intervals of correlations within groups."""
    low, high = np.full((2, r.size), np.nan)
    spearman = screens.total.correlation == "spearman"
    for k, one in enumerate(screens.shared):
        here = pairs.pair == k
        rank = Nuisance.of(one.within, one.n).rank
        low[here], high[here] = fisher_interval(r[here], one.n, rank, spearman=spearman)
    return low, high


def _ends(view: AnalysisView, pairs: Pairs) -> pd.DataFrame:
    table = pd.DataFrame({column: np.full(pairs.pair.size, "", dtype=object) for column in ENDS})
    for k, (first, second) in enumerate(view.pairs):
        rows = np.flatnonzero(pairs.pair == k)
        for end, block, places in (("source", first, pairs.i), ("target", second, pairs.j)):
            names = np.array(view.blocks[block].features, dtype=object)
            table.loc[rows, end] = names[places[rows]]
            table.loc[rows, f"{end}_block"] = block
    return table


def _evidence(view: AnalysisView, screens: Screens, pairs: Pairs) -> dict[str, FloatArray]:
    columns = {
        "r_spearman": "spearman",
        "r_without_one": "without_one",
        "r_observed": "observed",
        "imputed_share": "imputed_share",
    }
    found = {name: np.full(pairs.pair.size, np.nan) for name in columns}
    within = screens.chosen is screens.within
    for k, ((first, second), one) in enumerate(zip(view.pairs, screens.shared, strict=True)):
        rows = np.flatnonzero(pairs.pair == k)
        a, b = view.blocks[first], view.blocks[second]
        rows_a, rows_b = a.rows(one.samples), b.rows(one.samples)
        evidence = edge_evidence(
            a.values[rows_a],
            b.values[rows_b],
            pairs.i[rows],
            pairs.j[rows],
            nuisance=one.within if within else one.nuisance,
            x_imputed=a.imputed[rows_a],
            y_imputed=b.imputed[rows_b],
        )
        for name, field in columns.items():
            found[name][rows] = getattr(evidence, field)
    return found
