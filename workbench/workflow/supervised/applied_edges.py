"""Edges of an analysis looked for in another project: same sign, one-sided p, false-discovery rate over those tried."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.stats import t as student

from workbench.engine import Nuisance, benjamini_hochberg, centred, subject_means
from workbench.errors import InputError
from workbench.intake.faults import counted
from workbench.workflow.analysis_view import AnalysisView, Shared

FloatArray = NDArray[np.float64]

COLUMNS = (
    *(
        "source",
        "source_block",
        "target",
        "target_block",
        "r",
        "n_there",
        "r_there",
        "same_sign",
        "p",
        "q",
        "replicates",
    ),
    "why_not_tried",
)


def replicated_edges(
    edges: pd.DataFrame, view: AnalysisView, there: AnalysisView
) -> tuple[pd.DataFrame, list[str]]:
    """Return the edges with their correlation there, and what that says in sentences.

    ``r_there`` is the partial correlation on the samples that both blocks have there, in the other project's own
    preparation, with its own nuisance removed, and its groups where edges were selected within groups; private
    variation is not removed. ``p`` is one-sided towards the sign of ``r``; ``q`` is Benjamini & Hochberg's over the
    edges tried, ``replicates`` when it is at or under the analysis's fdr.
    """
    table = edges[["source", "source_block", "target", "target_block", "r"]].reset_index(drop=True)
    table = table.assign(n_there=np.nan, r_there=np.nan, p=np.nan, why_not_tried="")
    lines: list[str] = []
    for (first, second), part in table.groupby(["source_block", "target_block"], sort=False):
        if first not in there.blocks or second not in there.blocks:
            table.loc[part.index, "why_not_tried"] = "block not there"
            continue
        try:
            shared = there.shared([first, second])
        except InputError as error:
            table.loc[part.index, "why_not_tried"] = "design there"
            lines.append(f"edges between {first} and {second} not tried: {error}")
            continue
        _try_pair(table, part, there, shared, within=view.settings.network.select == "within")
    tried = table["p"].notna().to_numpy()
    table["q"] = np.nan
    if tried.any():
        table.loc[tried, "q"] = benjamini_hochberg(table.loc[tried, "p"].to_numpy())
    fdr = view.settings.network.fdr
    table["replicates"] = tried & (table["q"].to_numpy() <= fdr)
    table["same_sign"] = np.where(tried, np.sign(table["r_there"]) == np.sign(table["r"]), False)
    lines.append(_sentence(table, tried, fdr))
    return table[list(COLUMNS)], lines


def _try_pair(
    table: pd.DataFrame, part: pd.DataFrame, there: AnalysisView, shared: Shared, *, within: bool
) -> None:
    first, second = part["source_block"].iloc[0], part["target_block"].iloc[0]
    sides = []
    for end, name in (("source", first), ("target", second)):
        block = there.blocks[name]
        place = {feature: k for k, feature in enumerate(block.features)}
        columns = np.array([place.get(feature, -1) for feature in part[end]])
        sides.append((columns, block.values[block.rows(shared.samples)]))
    held = (sides[0][0] >= 0) & (sides[1][0] >= 0)
    table.loc[part.index[~held], "why_not_tried"] = "feature not there"
    if not held.any():
        return
    nuisance = shared.within if within else shared.nuisance
    values = [x[:, columns[held]] for columns, x in sides]
    values, nuisance, n = _at_level(shared, values, nuisance, there.settings.level)
    removed = Nuisance.of(nuisance, len(values[0]))
    x, y = (removed.residuals(one) for one in values)
    lengths = np.linalg.norm(x, axis=0) * np.linalg.norm(y, axis=0)
    r = np.divide((x * y).sum(axis=0), lengths, out=np.full(lengths.shape, np.nan), where=lengths > 0.0)
    freedom = n - removed.rank - 1
    index = part.index[held]
    table.loc[index, "n_there"] = n
    if freedom < 1:
        table.loc[index, "why_not_tried"] = "too few samples there"
        return
    table.loc[index, "r_there"] = r
    bounded = np.clip(r, -1.0 + 1e-15, 1.0 - 1e-15)
    towards = np.sign(part.loc[index, "r"].to_numpy()) * bounded * np.sqrt(freedom / (1.0 - bounded**2))
    table.loc[index, "p"] = student.sf(towards, freedom)
    table.loc[index[~np.isfinite(r)], "why_not_tried"] = "no variation there"


def _at_level(
    shared: Shared, values: list[FloatArray], nuisance: FloatArray, level: str | None
) -> tuple[list[FloatArray], FloatArray, int]:
    """Values at the level asked for, and how many of them count: subjects, where samples are repeated."""
    design = shared.subjects
    if design is None or design.kind == "single" or level is None:
        return values, nuisance, len(values[0])
    if level == "subjects":
        means = [subject_means(design, one) for one in values]
        return means, subject_means(design, nuisance), design.n_subjects
    changes = [centred(design, one) for one in values]
    return changes, centred(design, nuisance), int(np.unique(design.subject[design.repeated]).size)


def _sentence(table: pd.DataFrame, tried: NDArray[np.bool_], fdr: float) -> str:
    count = int(tried.sum())
    if not len(table):
        return "no edges to look for there: the network here is empty"
    if not count:
        return f"of {counted(len(table), 'edge')} none could be tried there"
    agree = int(table.loc[tried, "same_sign"].sum())
    found = int(table["replicates"].sum())
    chance = f" (by chance half of them, {count / 2:.0f})" if count > 1 else " (by chance half the time)"
    return (
        f"edges: {count:,} of {len(table):,} tried there, {agree:,} with the same sign{chance}; {found:,} replicated "
        f"(one-sided, false-discovery rate {fdr:g} over the edges tried)"
    )
