"""Features as the screen tested them: what the design and private variation leave, ranks and heavy tails as there."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import rankdata

from workbench.engine import Nuisance
from workbench.engine.pairs.repeated import mapped_block
from workbench.engine.pairs.subject_space import SubjectSpace, subject_space
from workbench.engine.private.private_components import tells_components
from workbench.engine.private.private_variation import cleaned_features
from workbench.workflow.analysis_view import AnalysisView, Shared
from workbench.workflow.network.private import PrivatePart
from workbench.workflow.network.screening import cleaned_between, subjects_of

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class RowValues:
    """Blocks on independent rows, the nuisance and private variation removed, and the map that led there."""

    values: dict[str, FloatArray]
    space: SubjectSpace


def tested_on_samples(
    view: AnalysisView,
    x: FloatArray,
    samples: Sequence[str],
    columns: FloatArray,
    private: PrivatePart | None,
) -> FloatArray:
    """Return features of one block (samples, features) as they were tested, where samples are independent.

    ``columns`` are the nuisance (and the group), ``private`` what the network stage did to the block.
    """
    rows, network = list(samples), view.settings.network
    common = Nuisance.of(columns, len(rows))
    own, steady = common, np.ones(len(rows))
    if private is not None:
        if tells_components(common):
            own = Nuisance.of(np.column_stack([columns, private.scores.loc[rows]]), len(rows))
        if private.steady is not None:
            steady = private.steady.loc[rows].to_numpy()
    if network.correlation == "spearman":
        return own.residuals(np.asarray(rankdata(x, axis=0), dtype=np.float64))
    if network.remove_private:
        return own.residuals(cleaned_features(x, common, own, steady))
    return own.residuals(x)


def tested_on_rows(
    view: AnalysisView, names: Sequence[str], shared: Shared, columns: FloatArray, within: bool
) -> RowValues:
    """Return blocks on the independent rows of their samples, where subjects have several.

    Private variation is told again on the rows that the named blocks have in common, as the screen did for two.
    """
    if view.settings.network.remove_private:
        made = cleaned_between(view, names, shared, within)
        found: dict[str, FloatArray] = {}
        for pair, places in zip(made.pairs, made.places, strict=True):
            for place, side, own in zip(
                places, (pair.x, pair.y), (pair.x_private, pair.y_private), strict=True
            ):
                found.setdefault(names[place], (own or made.space.nuisance).residuals(np.asarray(side)))
        return RowValues(found, made.space)
    design, level = subjects_of(view, shared)
    chosen = view.settings.network.correlation
    blocks = [view.blocks[name].values[view.blocks[name].rows(shared.samples)] for name in names]
    space = subject_space(blocks, design, columns, level, chosen)
    values = {
        name: space.nuisance.residuals(mapped_block(block, design, space, level, chosen)[:, :])
        for name, block in zip(names, blocks, strict=True)
    }
    return RowValues(values, space)
