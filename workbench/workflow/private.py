"""Private variation that a screen removed: what it was, in a table, a figure and sentences, and its scores."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import Nuisance
from workbench.engine.association import SampleColumn, associate
from workbench.engine.far_values import FEWEST, HEAVY, excess_kurtosis
from workbench.engine.private_variation import RealComponent
from workbench.figures import Drawing
from workbench.figures.private import ComponentBar, draw_private
from workbench.intake.faults import counted
from workbench.look.view import sample_columns
from workbench.look.words import listed, percent
from workbench.store import check_file
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.looking import block_view
from workbench.workflow.screening import Screen, layer_block
from workbench.workflow.state import ProjectState

FloatArray = NDArray[np.float64]

COLUMNS = ("block", "component", "share", "goes_with", "top_features")
GOES_WITH = 0.05
TOP_FEATURES = 5
FILE = "private.h5"


def private_table(state: ProjectState, view: AnalysisView, screen: Screen) -> pd.DataFrame:
    """Return private.tsv: a row for each component that was removed from its block.

    ``share`` is of the block's variance after the nuisance, ``goes_with`` names the sample-sheet columns that
    explain it (false-discovery rate of 5 % over the block's components and columns, with their R2),
    ``top_features`` those that it moves most, with the sign of their correlation.
    """
    rows = []
    for name, components in screen.components.items():
        removed = [one for one in components if one.removed]
        if removed and any_removed(view, screen, name):
            told = _goes_with(state, view, name, removed)
            rows += [
                (name, one.number, one.share, with_what, _top(view, name, one))
                for one, with_what in zip(removed, told, strict=True)
            ]
    return pd.DataFrame(rows, columns=list(COLUMNS))


def any_removed(view: AnalysisView, screen: Screen, block: str) -> bool:
    """Return whether removal was on in some pair of a block."""
    return any(block in pair and not off for pair, off in zip(view.pairs, screen.off, strict=True))


def private_lines(view: AnalysisView, screen: Screen, heavy: Mapping[str, int]) -> list[str]:
    """Return what was removed, a sentence for each block, and where nothing was and why.

    ``heavy`` counts the features of heavy tails in each block (:func:`heavy_tailed`).
    """
    lines = []
    for name, components in screen.components.items():
        if not any_removed(view, screen, name):
            continue
        removed = [one for one in components if one.removed]
        kept = [one for one in components if one.shared_with]
        if not removed:
            lines.append(f"{name}: no private variation to remove" + _kept_words(kept))
            continue
        share = percent(sum(one.share for one in removed))
        count = counted(len(removed), "private component")
        lines.append(f"{name}: {count} removed ({share} of its variance, private.tsv)" + _kept_words(kept))
    lines += list(dict.fromkeys(reason for reason in screen.off if reason))
    for name, features in heavy.items():
        told = counted(features, "feature with heavy tails enters", "features with heavy tails enter")
        lines.append(f"{name}: {told} by the normal scores of ranks (guide private)")
    return lines


def heavy_tailed(view: AnalysisView, screen: Screen) -> dict[str, int]:
    """Return how many features of each block were tested by the normal scores of their ranks; empty for ranks."""
    if screen.found.correlation == "spearman" or not screen.components:
        return {}
    found: dict[str, int] = {}
    for name, components in screen.components.items():
        block = layer_block(view, name, view.within_groups)
        taken = [one.scores for one in components if one.removed and any_removed(view, screen, name)]
        own = Nuisance.of(np.column_stack([block.nuisance, *taken]), len(block.rows))
        if own.n_samples - own.rank >= FEWEST:
            count = int((excess_kurtosis(own.residuals(block.values)) > HEAVY).sum())
            found |= {name: count} if count else {}
    return found


def private_record(view: AnalysisView, screen: Screen, heavy: Mapping[str, int]) -> dict[str, Any]:
    """Return what the record says of private variation: components of each block, and where it was off."""
    return {
        "components": {
            name: [
                {"component": one.number, "share": one.share, "shared_with": one.shared_with, "p": one.p}
                for one in components
            ]
            for name, components in screen.components.items()
        },
        "features_by_normal_scores": dict(heavy),
        "off": {
            f"{first} x {second}": off
            for (first, second), off in zip(view.pairs, screen.off, strict=True)
            if off
        },
    }


def draw_removed(screen: Screen) -> tuple[Drawing, ...]:
    """Return the figure of the components that stayed and those that went; none where there are no components."""
    bars = {
        name: [ComponentBar(one.number, one.share, one.shared_with) for one in components]
        for name, components in screen.components.items()
    }
    return draw_private(bars) if any(bars.values()) else ()


def write_scores(path: Path, view: AnalysisView, screen: Screen) -> None:
    """Write the scores of what was removed from each block, which is what shows a pair as it was tested."""
    text = h5py.string_dtype("utf-8")
    with h5py.File(path, "w") as file:
        file.attrs["format"] = 1
        for name, components in screen.components.items():
            removed = [one for one in components if one.removed]
            if not any_removed(view, screen, name):
                removed = []
            part = file.create_group(name)
            part.create_dataset("samples", data=list(view.shared((name,)).samples), dtype=text)
            scores = [one.scores for one in removed]
            part.create_dataset("scores", data=np.column_stack(scores) if scores else np.zeros((0, 0)))


def read_scores(state: ProjectState, analysis: str, block: str) -> pd.DataFrame | None:
    """Return the scores of what was removed from a block, a row for each sample; None where nothing was."""
    relative = f"results/{analysis}/{FILE}"
    if not (state.root / relative).exists():
        return None
    with h5py.File(check_file(state.root, relative), "r") as file:
        if block not in file or file[block]["scores"].size == 0:
            return None
        return pd.DataFrame(file[block]["scores"][()], index=file[block]["samples"].asstr()[()])


def _kept_words(kept: list[RealComponent]) -> str:
    if not kept:
        return ""
    others = listed(sorted({one.shared_with for one in kept}))
    return f"; {len(kept)} shared with {others} stay" + ("s" if len(kept) == 1 else "")


def _top(view: AnalysisView, name: str, one: RealComponent) -> str:
    features = view.blocks[name].features
    pairs = zip(one.leading[:TOP_FEATURES], one.loadings[:TOP_FEATURES], strict=True)
    return "; ".join(f"{features[place]} ({loading:+.2f})" for place, loading in pairs)


def _goes_with(
    state: ProjectState, view: AnalysisView, name: str, removed: list[RealComponent]
) -> Iterator[str]:
    samples = view.shared((name,)).samples
    looked = block_view(state, view.blocks[name])
    rows = [looked.samples.index(sample) for sample in samples]
    columns = [
        SampleColumn(one.name, one.kind, one.values[rows], one.levels) for one in sample_columns(looked)
    ]
    found = associate(np.column_stack([one.scores for one in removed]), columns)
    for k in range(len(removed)):
        hit = [j for j in range(len(columns)) if found.q[j, k] <= GOES_WITH]
        hit.sort(key=lambda j: -found.r2[j, k])
        yield "; ".join(f"{columns[j].name} (R2 {found.r2[j, k]:.2f})" for j in hit)
