"""The tables of pairs of an analysis: edges with what speaks for and against each, and pairs that rest on the group."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import PairFigures, edge_evidence, fisher_interval
from workbench.engine.evidence.pair_basis import pair_basis
from workbench.engine.pairs.repeated import without_subject
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.network.screening import RepeatedRows, Screen, Screens

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.intp]
ENDS = ["source", "source_block", "target", "target_block"]


@dataclass(frozen=True, eq=False)
class Pairs:
    """Chosen pairs: position of the block pair and of both features."""

    pair: IndexArray
    i: IndexArray
    j: IndexArray


def edges_table(view: AnalysisView, screens: Screens) -> pd.DataFrame:
    """Return the edges, strongest evidence first, with all that speaks for and against each."""
    screen = screens.chosen.found
    pairs = Pairs(screen.pair_index, screen.i, screen.j)
    table = _ends(view, pairs)
    for column in ("n", "r", "r_low", "r_high", "p", "q", "q_block"):
        table[column] = getattr(screen, column)
    table = table.assign(**_rows_counted(screens.chosen, screen.pair_index))
    table["support"] = screens.chosen.support
    total = screens.total.found.lookup(pairs.pair, pairs.i, pairs.j)
    grouped = screens.within is not None
    table["r_total"] = total.r if grouped else np.nan
    table["q_total"] = total.q if grouped else np.nan
    table["basis"] = ""
    if screens.within is not None:
        found = screens.within.found.lookup(pairs.pair, pairs.i, pairs.j)
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
            n=[], r_total=[], p_total=[], q_total=[], r_within=[], q_within=[], basis=[], support=[]
        )
    total = screens.total.found
    every = Pairs(total.pair_index, total.i, total.j)
    inside = screens.within.found.lookup(every.pair, every.i, every.j)
    fdr = view.settings.network.fdr
    keep = ~((inside.q <= fdr) & (inside.q_block <= fdr))
    alone = Pairs(every.pair[keep], every.i[keep], every.j[keep])
    found = screens.within.found.lookup(alone.pair, alone.i, alone.j)
    table = _ends(view, alone)
    table["n"] = total.n[keep]
    table = table.assign(**_rows_counted(screens.total, alone.pair))
    table["r_total"], table["p_total"], table["q_total"] = total.r[keep], total.p[keep], total.q[keep]
    low, high = _interval(found.r, alone, screens)
    table["r_within"], table["r_within_low"], table["r_within_high"] = found.r, low, high
    table["q_within"] = found.q
    table["basis"] = basis_of(view, found, total.r[keep], alone, screens)
    table["support"] = screens.total.support[keep]
    return table


def basis_of(
    view: AnalysisView, within: PairFigures, r_total: FloatArray, pairs: Pairs, screens: Screens
) -> NDArray[np.str_]:
    """Return what each pair rests on by :func:`~workbench.engine.evidence.pair_basis.pair_basis`."""
    fdr = view.settings.network.fdr
    passes = (within.q <= fdr) & (within.q_block <= fdr)
    return pair_basis(passes, *_interval(within.r, pairs, screens), r_total)


def _interval(r: FloatArray, pairs: Pairs, screens: Screens) -> tuple[FloatArray, FloatArray]:
    """Return the unadjusted 95 % intervals of correlations within groups."""
    low, high = np.full((2, r.size), np.nan)
    if screens.within is None:
        return low, high
    found = screens.within.found
    for k, freedom in enumerate(screens.within.freedom):
        here = pairs.pair == k
        spearman = found.correlation == "spearman"
        low[here], high[here] = fisher_interval(r[here], freedom + 2, 1, spearman=spearman)
    return low, high


def _rows_counted(screen: Screen, pair: IndexArray) -> dict[str, IndexArray]:
    """Return the changes within subjects, or the subjects, that each pair was tested on; nothing for samples."""
    if not screen.repeated:
        return {}
    (name, *_), counts = zip(*(one.counted for one in screen.rows), strict=True)
    return {name: np.array(counts, dtype=np.intp)[pair]}


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
    chosen = screens.chosen
    for k, ((first, second), one) in enumerate(zip(view.pairs, screens.shared, strict=True)):
        rows = np.flatnonzero(pairs.pair == k)
        a, b = view.blocks[first], view.blocks[second]
        imputed = a.imputed[a.rows(one.samples)], b.imputed[b.rows(one.samples)]
        i, j = pairs.i[rows], pairs.j[rows]
        if chosen.repeated:
            figures = _repeated_evidence(chosen.rows[k], (i, j), imputed)
        else:
            pair = chosen.pairs[k]
            nuisance = None if pair.nuisance is None else np.asarray(pair.nuisance)
            x, y = np.asarray(pair.x), np.asarray(pair.y)
            evidence = edge_evidence(
                x, y, i, j, nuisance=nuisance, x_imputed=imputed[0], y_imputed=imputed[1]
            )
            figures = {name: getattr(evidence, field) for name, field in columns.items()}
        for name, values in figures.items():
            found[name][rows] = values
    if chosen.found.correlation == "spearman" and not chosen.repeated:
        found["r_spearman"] = chosen.found.r
    return found


def _repeated_evidence(
    rows: RepeatedRows,
    places: tuple[IndexArray, IndexArray],
    imputed: tuple[NDArray[np.bool_], NDArray[np.bool_]],
) -> dict[str, FloatArray]:
    """Return what can be said of pairs tested on several samples a subject: a whole subject is left out at a time."""
    i, j = places
    filled = (imputed[0][:, i] | imputed[1][:, j])[rows.space.used]
    return {
        "r_without_one": without_subject(rows.space, rows.pair.x, rows.pair.y, i, j),
        "imputed_share": filled.mean(axis=0) if filled.size else np.zeros(i.size),
    }
