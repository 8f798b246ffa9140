"""differential.tsv: pairs whose correlation differs between two groups."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from workbench.engine import BlockPair
from workbench.engine.differential import DifferentialScreen, screen_differences
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.reporting import Reporter
from workbench.workflow.screening import Screens, is_repeated

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
ONE_SAMPLE_EACH = (
    "differential edges need one sample of each subject: where subjects have several, groups are not compared "
    "pair by pair"
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
    group.
    """
    empty = pd.DataFrame({column: [] for column in COLUMNS})
    if not view.factors:
        return Differences(empty, ())
    if any(is_repeated(one) for one in screens.shared):
        return Differences(empty, (ONE_SAMPLE_EACH,))
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
        pair = BlockPair(f"{first} x {second}", x, y, one.nuisance)
        reference = np.flatnonzero(one.groups.codes == 0)
        for code, level in enumerate(one.groups.levels[1:], start=1):
            rows = reference, np.flatnonzero(one.groups.codes == code)
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
