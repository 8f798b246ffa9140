"""Private variation that a screen removed: what it was, in a table, a figure and sentences, and its scores."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import Nuisance
from workbench.engine.far_values import FEWEST, HEAVY, excess_kurtosis
from workbench.engine.look.association import SampleColumn, associate, associate_rows
from workbench.engine.private.private_variation import RealComponent, steadied
from workbench.figures import Drawing
from workbench.figures.private import ComponentBar, draw_private
from workbench.intake.faults import counted
from workbench.look.view import sample_columns
from workbench.look.words import listed, percent
from workbench.store import check_file
from workbench.workflow.analysis_view import AnalysisView, subject_names
from workbench.workflow.entry.looking import block_view
from workbench.workflow.network.screening import BlockRemoval, Screen
from workbench.workflow.state import ProjectState

FloatArray = NDArray[np.float64]

COLUMNS = ("block", "beside", "component", "share", "goes_with", "top_features")
GOES_WITH = 0.05
TOP_FEATURES = 5
MOST_ODD = 5
FILE = "private.h5"


def private_table(state: ProjectState, view: AnalysisView, screen: Screen) -> pd.DataFrame:
    """Return private.tsv: a row for each component that was removed from its block.

    ``beside`` is the other block of the pair that it was removed for, where subjects have several samples, and
    empty otherwise. ``share`` is of the block's variance after the nuisance, ``goes_with`` names the sample-sheet
    columns that explain it (false-discovery rate of 5 % over the block's components and columns, with their R2),
    ``top_features`` those that it moves most, with the sign of their correlation.
    """
    rows = []
    for one in screen.removals:
        if one.removed:
            told = _goes_with(state, view, one)
            rows += [
                (one.block, one.beside, part.number, part.share, with_what, _top(view, one.block, part))
                for part, with_what in zip(one.removed, told, strict=True)
            ]
    return pd.DataFrame(rows, columns=list(COLUMNS))


def named_removals(removals: Sequence[BlockRemoval]) -> list[tuple[str, BlockRemoval]]:
    """Return each block's removal with its name: the block, and the one beside it where a block has several."""
    blocks = [one.block for one in removals]
    return [
        (f"{one.block} beside {one.beside}" if blocks.count(one.block) > 1 else one.block, one)
        for one in removals
    ]


def private_lines(view: AnalysisView, screen: Screen, heavy: Mapping[str, int]) -> list[str]:
    """Return what was removed, a sentence for each block, and where nothing was and why.

    ``heavy`` counts the features of heavy tails in each block (:func:`heavy_tailed`).
    """
    lines, named = [], named_removals(screen.removals)
    for name, one in named:
        if not one.on:
            continue
        kept = [part for part in one.components if part.shared_with]
        if not one.removed:
            lines.append(f"{name}: no private variation to remove" + _kept_words(kept))
            continue
        share = percent(sum(part.share for part in one.removed))
        count = counted(len(one.removed), "private component")
        lines.append(
            f"{name}: {count} removed ({share} of {_of_what(view, one)}, private.tsv)" + _kept_words(kept)
        )
    lines += list(dict.fromkeys(reason for reason in screen.off if reason))
    lines += [_left_in_line(view, name, one) for name, one in named if left_in(one)]
    lines += [_odd_line(name, one) for name, one in named if one.odd]
    for name, features in heavy.items():
        told = counted(features, "feature with heavy tails enters", "features with heavy tails enter")
        lines.append(f"{name}: {told} by the normal scores of ranks (guide private)")
    return lines


def _of_what(view: AnalysisView, one: BlockRemoval) -> str:
    """Return which variance a share is of: the block's, that within subjects, or that between them."""
    if one.space is None:
        return "its variance"
    return f"its variance {'between' if view.settings.level == 'subjects' else 'within'} subjects"


def heavy_tailed(screen: Screen) -> dict[str, int]:
    """Return how many features of each block were tested by the normal scores of their ranks; empty for ranks."""
    if screen.found.correlation == "spearman":
        return {}
    found: dict[str, int] = {}
    for name, one in named_removals(screen.removals):
        n = len(one.rows.rows)
        scores = [part.scores for part in one.removed]
        nuisance = Nuisance.of(one.rows.nuisance, n)
        own = Nuisance.of(np.column_stack([one.rows.nuisance, *scores]), n)
        heavy = one.heavy
        if own.n_samples - own.rank >= FEWEST:
            rest = steadied(one.rows.values, nuisance, own, one.steady)
            heavy = heavy | (excess_kurtosis(rest) > HEAVY)
        found |= {name: int(heavy.sum())} if heavy.any() else {}
    return found


def left_in(one: BlockRemoval) -> tuple[RealComponent, ...]:
    """Return the components that stay since they cannot be told from shared ones; none where removal is off."""
    return tuple(part for part in one.components if part.stays == "entangled") if one.on else ()


def _left_in_line(view: AnalysisView, name: str, one: BlockRemoval) -> str:
    """Return what stays undecided, and which correlation the intervals are then of."""
    tied = left_in(one)
    share = percent(sum(part.share for part in tied))
    stay, them = ("stays", "it") if len(tied) == 1 else ("stay", "them")
    return (
        f"{name}: {counted(len(tied), 'component')} ({share} of {_of_what(view, one)}) cannot be told from what other "
        f"layers share, and {stay}: the intervals of its edges are of correlations with {them} left in (guide private)"
    )


def _odd_line(name: str, one: BlockRemoval) -> str:
    """Return which samples, or subjects, are odd and were brought back to size."""
    what = "sample" if one.space is None else "subject"
    shown = sorted(one.odd.items(), key=lambda item: (item[1], item[0]))
    told = [f"{sample} (x {factor:.2f})" for sample, factor in shown[:MOST_ODD]]
    if len(shown) > MOST_ODD:
        told.append(f"{len(shown) - MOST_ODD} more (record.json)")
    changes = "changes" if one.space is not None and one.space.contrasts is not None else "values"
    return (
        f"{name}: {counted(len(shown), f'odd {what}', f'odd {what}s')}, {changes} large throughout, brought back to "
        f"size: {listed(told)}"
    )


def private_record(view: AnalysisView, screen: Screen, heavy: Mapping[str, int]) -> dict[str, Any]:
    """Return what the record says of private variation: components of each block, and where it was off."""
    named = named_removals(screen.removals)
    return {
        "components": {
            name: [
                {"component": part.number, "share": part.share, "shared_with": part.shared_with, "p": part.p}
                for part in one.components
            ]
            for name, one in named
        },
        "features_by_normal_scores": dict(heavy),
        "left_in": {name: [part.number for part in left_in(one)] for name, one in named if left_in(one)},
        "odd_brought_back_to_size": {name: dict(one.odd) for name, one in named if one.odd},
        "off": {
            f"{first} x {second}": off
            for (first, second), off in zip(view.pairs, screen.off, strict=True)
            if off
        },
    }


def draw_removed(screen: Screen) -> tuple[Drawing, ...]:
    """Return the figure of the components that stayed and those that went; none where there are no components."""
    bars = {
        name: [ComponentBar(part.number, part.share, part.stays) for part in one.components]
        for name, one in named_removals(screen.removals)
    }
    return draw_private(bars) if any(bars.values()) else ()


def write_scores(path: Path, view: AnalysisView, screen: Screen) -> None:
    """Write the scores of what was removed from each block, and what shows a pair as it was tested.

    ``steady`` is what the residuals of each sample were multiplied by, less than 1 for odd ones.
    Where subjects have several samples these are deviations by sample within each subject (or one for each
    subject, ``samples`` then holding the subjects), found for the pair with the block ``beside``.
    """
    text = h5py.string_dtype("utf-8")
    with h5py.File(path, "w") as file:
        file.attrs["format"] = 1
        for name, one in named_removals(screen.removals):
            part = file.create_group(name)
            part.attrs["beside"] = one.beside
            part.create_dataset("samples", data=_row_names(view, one), dtype=text)
            scores = (
                np.column_stack([part.scores for part in one.removed]) if one.removed else np.zeros((0, 0))
            )
            if one.space is not None and one.removed:
                scores = one.space.on_samples(scores)
            part.create_dataset("scores", data=scores)
            if one.space is None:
                part.create_dataset("steady", data=one.steady)


def _row_names(view: AnalysisView, one: BlockRemoval) -> list[str]:
    """Return the samples that the scores are of, or the subjects where their means were compared."""
    if one.space is None:
        return list(one.samples)
    if one.space.contrasts is not None:
        return [one.samples[row] for row in one.space.used]
    return subject_names(view, one.samples)


@dataclass(frozen=True, eq=False)
class PrivatePart:
    """What was done to a block before its pairs were tested.

    ``scores`` are those of what was removed, a row for each sample and a column for each component; ``steady`` is what
    the residuals of each sample were multiplied by (None where subjects have several samples).
    """

    scores: pd.DataFrame
    steady: pd.Series | None


def read_private(state: ProjectState, analysis: str, block: str, beside: str = "") -> PrivatePart | None:
    """Return what was done to a block; None where private variation was not looked for.

    ``beside`` is the other block of the pair, which matters where subjects have several samples.
    """
    relative = f"results/{analysis}/{FILE}"
    if not (state.root / relative).exists():
        return None
    with h5py.File(check_file(state.root, relative), "r") as file:
        for name in (block, f"{block} beside {beside}"):
            if name in file:
                samples, scores = file[name]["samples"].asstr()[()], file[name]["scores"][()]
                scores = scores if scores.size else np.zeros((len(samples), 0))
                steady = (
                    pd.Series(file[name]["steady"][()], index=samples) if "steady" in file[name] else None
                )
                return PrivatePart(pd.DataFrame(scores, index=samples), steady)
    return None


def _kept_words(kept: list[RealComponent]) -> str:
    if not kept:
        return ""
    others = listed(sorted({one.shared_with for one in kept}))
    return f"; {len(kept)} shared with {others} stay" + ("s" if len(kept) == 1 else "")


def _top(view: AnalysisView, name: str, one: RealComponent) -> str:
    features = view.blocks[name].features
    pairs = zip(one.leading[:TOP_FEATURES], one.loadings[:TOP_FEATURES], strict=True)
    return "; ".join(f"{features[place]} ({loading:+.2f})" for place, loading in pairs)


def _goes_with(state: ProjectState, view: AnalysisView, one: BlockRemoval) -> Iterator[str]:
    looked = block_view(state, view.blocks[one.block])
    rows = [looked.samples.index(sample) for sample in one.samples]
    columns = [
        SampleColumn(part.name, part.kind, part.values[rows], part.levels) for part in sample_columns(looked)
    ]
    scores = np.column_stack([part.scores for part in one.removed])
    if one.space is None:
        found = associate(scores, columns)
    else:
        found = associate_rows(scores, columns, one.space.matrix, one.space.nuisance)
    for k in range(len(one.removed)):
        hit = [j for j in range(len(columns)) if found.q[j, k] <= GOES_WITH]
        hit.sort(key=lambda j: -found.r2[j, k])
        yield "; ".join(f"{columns[j].name} (R2 {found.r2[j, k]:.2f})" for j in hit)
