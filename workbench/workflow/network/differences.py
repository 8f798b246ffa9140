"""differential.tsv: pairs whose correlation differs between two groups."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from workbench.engine import BlockPair
from workbench.engine.evidence.differential import DifferentialScreen, screen_differences
from workbench.engine.pairs.repeated import rows_by_subject
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.network.screening import Screens, is_repeated, subjects_of
from workbench.workflow.reporting import Reporter

COLUMNS = (
    *(
        "source",
        "source_block",
        "target",
        "target_block",
        "first_group",
        "second_group",
        "n_first",
        "n_second",
    ),
    *("r_first", "r_second", "difference", "p", "q", "q_block"),
)
OWN_GROUPS = (
    "differential edges need subjects that stay in their group: where they change it, groups are not compared pair by "
    "pair"
)


@dataclass(frozen=True, eq=False)
class Differences:
    """The pairs that differ, and what is to be said of the comparison."""

    table: pd.DataFrame
    lines: tuple[str, ...]


def group_contrasts(view: AnalysisView, screens: Screens, reporter: Reporter) -> Differences:
    """Return the pairs of features whose rank correlation differs between groups, over all pairs.

    With more than two groups each one is compared with the reference; the false-discovery rate is over all pairs of
    all comparisons.  Nuisance is removed inside each group; private variation stays in, since it is not told inside a
    group.  Where subjects have several samples their changes, or means, are compared between groups of subjects.
    """
    empty = pd.DataFrame({column: [] for column in COLUMNS})
    if not view.factors:
        return Differences(empty, ())
    if any(is_repeated(one) and not one.groups_of_subjects for one in screens.shared):
        return Differences(empty, (OWN_GROUPS,))
    asked = _comparisons(view, screens)
    network = view.settings.network
    with reporter.progress("differences between groups") as progress:
        found = screen_differences(
            [pair for pair, _, _, _ in asked],
            [members for _, _, members, _ in asked],
            fdr=network.fdr,
            maximum_edges=network.maximum_edges,
            progress=progress,
        )
    return Differences(_table(view, asked, found), tuple(_lines(found)))


Asked = tuple[BlockPair, int, tuple[np.ndarray, np.ndarray], tuple[str, str]]


def _comparisons(view: AnalysisView, screens: Screens) -> list[Asked]:
    """Return each block pair with each two groups to be compared: the pair, its number, rows and names of both."""
    asked: list[Asked] = []
    for k, ((first, second), one) in enumerate(zip(view.pairs, screens.shared, strict=True)):
        assert one.groups is not None
        x = view.blocks[first].values[view.blocks[first].rows(one.samples)]
        y = view.blocks[second].values[view.blocks[second].rows(one.samples)]
        pair, codes = BlockPair(f"{first} x {second}", x, y, one.nuisance), one.groups.codes
        if is_repeated(one):
            design, compared = subjects_of(view, one)
            pair, subjects = rows_by_subject(pair, design, compared)
            codes = codes[np.unique(design.subject, return_index=True)[1]][subjects]
        reference = np.flatnonzero(codes == 0)
        for code, level in enumerate(one.groups.levels[1:], start=1):
            rows = reference, np.flatnonzero(codes == code)
            asked.append((pair, k, rows, (one.groups.levels[0], level)))
    return asked


def _table(view: AnalysisView, asked: list[Asked], found: DifferentialScreen) -> pd.DataFrame:
    table = pd.DataFrame({column: np.full(found.n_edges, "", dtype=object) for column in COLUMNS[:6]})
    for number, (_, k, _, groups) in enumerate(asked):
        rows = np.flatnonzero(found.pair_index == number)
        for end, block, places in zip(("source", "target"), view.pairs[k], (found.i, found.j), strict=True):
            table.loc[rows, end] = np.array(view.blocks[block].features, dtype=object)[places[rows]]
            table.loc[rows, f"{end}_block"] = block
        table.loc[rows, ["first_group", "second_group"]] = groups
    table["n_first"], table["n_second"] = found.n_first, found.n_second
    for column in COLUMNS[8:]:
        table[column] = getattr(found.figures, column)
    return table


def _lines(found: DifferentialScreen) -> list[str]:
    reasons = list(dict.fromkeys(f"differential edges: {reason}" for reason in found.off if reason))
    if not any(found.tested):
        return reasons
    told = "no pair" if not found.passed else f"{found.passed:,} pair{'s' * (found.passed != 1)}"
    return [
        *reasons,
        f"{told} of {sum(found.tested):,} correlate{'s' * (found.passed < 2)} differently between groups "
        "(differential.tsv)",
    ]
