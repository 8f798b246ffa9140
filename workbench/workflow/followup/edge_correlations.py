"""The correlations of all features that have an edge, in the order in which they are drawn and written."""

from __future__ import annotations

from itertools import groupby
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.errors import InputError
from workbench.figures.edge_matrix import EdgeMatrix, alike_order
from workbench.workflow.followup.pathway_tables import block_places
from workbench.workflow.followup.residual_blocks import ResidualViews

FloatArray = NDArray[np.float64]

MOST_FEATURES = 120
"""Features with an edge that the matrix takes, those with the largest sum of |r| over their edges first."""


def edge_correlations(
    views: ResidualViews, features: pd.DataFrame, edges: pd.DataFrame
) -> tuple[pd.DataFrame, EdgeMatrix]:
    """Return edge_correlations.tsv and what its figure draws: communities, in them layers, in them alike features.

    Each correlation is on the samples that the two blocks share, with the design and private variation removed as in
    the screen.
    """
    strength = _strength(edges)
    keys = list(zip(features["block"], features["feature"], strict=True))
    with_edge = [row for row, key in enumerate(keys) if key in strength]
    chosen = sorted(with_edge, key=lambda row: (-strength[keys[row]], keys[row]))[:MOST_FEATURES]
    communities = pd.to_numeric(features["community"], errors="coerce").fillna(0).astype(int).to_numpy()
    layers = features["layer"].astype(str).to_numpy()
    chosen.sort(key=lambda row: (communities[row], layers[row], keys[row]))
    rows = np.array(chosen, dtype=np.intp)
    r = _correlations(views, features, rows)
    order: list[int] = []
    for _, run in groupby(
        range(rows.size), key=lambda place: (communities[rows[place]], layers[rows[place]])
    ):
        places = list(run)
        order += [places[k] for k in alike_order(r[np.ix_(places, places)])]
    rows, r = rows[order], r[np.ix_(order, order)]
    labels = features["label" if "label" in features else "feature"].astype(str).to_numpy()
    removed = "the design and the group" if views.view.within_groups else "the design"
    matrix = EdgeMatrix(
        tuple(labels[rows]),
        tuple(layers[rows]),
        tuple(int(number) for number in communities[rows]),
        r,
        len(with_edge),
        removed,
    )
    return _table(features.iloc[rows], communities[rows], r), matrix


def _strength(edges: pd.DataFrame) -> dict[tuple[str, str], float]:
    found: dict[tuple[str, str], float] = {}
    for end in ("source", "target"):
        for key, r in zip(zip(edges[f"{end}_block"], edges[end], strict=True), edges["r"], strict=True):
            found[key] = found.get(key, 0.0) + abs(float(r))
    return found


def _correlations(views: ResidualViews, features: pd.DataFrame, rows: NDArray[np.intp]) -> FloatArray:
    """Return the correlations of some features, block by block."""
    blocks, place = features["block"].to_numpy()[rows], block_places(views, features)[rows]
    r = np.full((rows.size, rows.size), np.nan)
    names = [name for name in views.view.blocks if name in set(blocks)]
    for number, first in enumerate(names):
        for second in names[number:]:
            try:
                found = views.of((first, second))
            except InputError:  # too few shared samples: these two blocks were not screened either
                continue
            here, there = blocks == first, blocks == second
            part = found.values[first][:, place[here]].T @ found.values[second][:, place[there]]
            r[np.ix_(here, there)] = np.clip(part, -1.0, 1.0)
            r[np.ix_(there, here)] = r[np.ix_(here, there)].T
    return r


def _table(features: pd.DataFrame, communities: NDArray[np.integer[Any]], r: FloatArray) -> pd.DataFrame:
    table = pd.DataFrame({name: features[name].to_numpy() for name in ("feature", "block", "layer")})
    table["community"] = communities
    names: dict[str, int] = {}
    columns = []
    for block, feature in zip(table["block"], table["feature"], strict=True):
        name = " ".join(f"{block}:{feature}".split())
        names[name] = names.get(name, 0) + 1
        columns.append(name if names[name] == 1 else f"{name} ({names[name]})")
    return pd.concat([table, pd.DataFrame(r, columns=columns)], axis=1)
