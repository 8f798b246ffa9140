"""What is known beforehand about each edge: a link of the user's table, sets that hold both ends."""

from __future__ import annotations

import numpy as np
import pandas as pd
from scipy import sparse

from workbench.pathways.links import KnownLinks
from workbench.pathways.matching import SetMembers, alternatives, match_column, match_sets
from workbench.pathways.sets import SetTable

MOST_NAMED = 5
"""Sets of an edge that are named, those with fewest features first; the others are counted."""


def edge_columns(
    edges: pd.DataFrame, features: pd.DataFrame, sets: SetTable | None, links: KnownLinks | None
) -> pd.DataFrame:
    """Return the columns ``known`` and ``shared_sets`` of an edges table, empty text where there is nothing.

    Parameters
    ----------
    edges : pandas.DataFrame
        ``source source_block target target_block``.
    features : pandas.DataFrame
        ``feature block`` and columns of identifiers, of all features of the analysis.
    sets, links
        What the user's tables hold; None for none.

    Raises
    ------
    InputError
        The sets hold none of the features.
    """
    ends = edge_ends(edges, features)
    known = known_evidence(features, links)[0] if links is not None else {}
    told = [known.get((source, target), known.get((target, source), "")) for source, target in ends.tolist()]
    shared = [""] * len(edges)
    if sets is not None:
        shared = shared_names(match_sets(features, sets), ends)
    return pd.DataFrame({"known": told, "shared_sets": shared}, index=edges.index, dtype=object)


def edge_ends(edges: pd.DataFrame, features: pd.DataFrame) -> np.ndarray:
    """Return the rows of the features table at both ends of each edge, shape (edges, 2)."""
    place = {key: row for row, key in enumerate(zip(features["block"], features["feature"], strict=True))}
    found = [
        (place[source_block, source], place[target_block, target])
        for source, source_block, target, target_block in zip(
            edges["source"], edges["source_block"], edges["target"], edges["target_block"], strict=True
        )
    ]
    return np.array(found, dtype=np.intp).reshape(len(edges), 2)


def known_evidence(features: pd.DataFrame, links: KnownLinks) -> tuple[dict[tuple[int, int], str], int]:
    """Return the evidence of known links between features of different layers, and the links that have both ends here.

    Identifiers are matched as those of sets are: each block by the column that has most of them, several in a cell as
    alternatives.
    """
    wanted = frozenset().union(*links.evidence)
    rows: dict[str, list[int]] = {}
    for block in dict.fromkeys(features["block"]):
        choice = match_column(features, block, wanted)
        if choice.column:
            here = np.flatnonzero(features["block"] == block)
            for row, cell in zip(here.tolist(), features[choice.column].to_numpy()[here], strict=True):
                for name in alternatives(cell) & wanted:
                    rows.setdefault(name, []).append(row)
    layers = features["layer" if "layer" in features else "block"].tolist()
    found: dict[tuple[int, int], str] = {}
    measured = 0
    for ends, evidence in links.evidence.items():
        first, second = sorted(ends)
        pairs = [(a, b) for a in rows.get(first, ()) for b in rows.get(second, ()) if layers[a] != layers[b]]
        measured += bool(pairs)
        for pair in pairs:
            found[min(pair), max(pair)] = "; ".join(
                filter(None, [found.get((min(pair), max(pair)), ""), evidence])
            )
    return found, measured


def shared_names(members: SetMembers, ends: np.ndarray) -> list[str]:
    """Return the names of the sets that hold both ends of each edge, the smallest sets first."""
    both = sparse.csr_array(members.matrix[ends[:, 0]].multiply(members.matrix[ends[:, 1]]))
    sizes = np.asarray(members.matrix.sum(axis=0)).ravel()
    names = []
    for row in range(both.shape[0]):
        places = both.indices[both.indptr[row] : both.indptr[row + 1]].tolist()
        ordered = sorted(places, key=lambda place: (sizes[place], place))
        shown = [members.table.sets[place].name for place in ordered[:MOST_NAMED]]
        more = [f"and {len(ordered) - MOST_NAMED} more"] if len(ordered) > MOST_NAMED else []
        names.append("; ".join(shown + more))
    return names
