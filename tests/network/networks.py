"""Invented tables of edges and features, and strategies for awkward ones."""

from __future__ import annotations

from typing import Any

import networkx as nx
import numpy as np
import pandas as pd
from hypothesis import strategies as st

from workbench.network import build_network
from workbench.network.builder import EDGE_COLUMNS

ATTRIBUTES = {"title": "an invented study", "analysis": "main", "fdr": 0.05}
NUMBERS = [
    "r_low",
    "r_high",
    "p",
    "q",
    "q_block",
    "r_total",
    "q_total",
    "model_r",
    "r_spearman",
    "imputed_share",
]


def features_table(transcripts: int, metabolites: int) -> pd.DataFrame:
    """Return features g0 ... of block rna and m0 ... of block lcms, with identifiers and numbers."""
    names = [f"g{i}" for i in range(transcripts)] + [f"m{j}" for j in range(metabolites)]
    blocks = ["rna"] * transcripts + ["lcms"] * metabolites
    layers = ["transcripts"] * transcripts + ["metabolites"] * metabolites
    table = pd.DataFrame({"feature": names, "block": blocks, "layer": layers})
    table["label"] = [f"label of {name}" for name in names]
    table["HMDB ID"] = [None if name[0] == "g" else f"HMDB{name[1:]:>07}" for name in names]
    table["entrez"] = pd.array([int(name[1:]) if name[0] == "g" else None for name in names], dtype="Int64")
    return table.assign(mean=np.linspace(0, 9, len(names)), pair1_own=np.linspace(-1, 1, len(names)))


def edges_table(pairs: list[tuple[int, int]], seed: int = 1) -> pd.DataFrame:
    """Return an edge from transcript i to metabolite j for each (i, j), with all the numbers of an edge."""
    random = np.random.default_rng(seed)
    table = pd.DataFrame({"source": [f"g{i}" for i, _ in pairs], "source_block": "rna"})
    table = table.assign(target=[f"m{j}" for _, j in pairs], target_block="lcms", n=40, basis="within")
    table["r"] = random.uniform(0.5, 1, len(pairs)) * random.choice([-1, 1], len(pairs))
    for column in NUMBERS:
        table[column] = random.uniform(0, 1, len(pairs))
    return table.assign(component=1)


def random_tables(
    edges: int, transcripts: int, metabolites: int, seed: int = 1
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Return tables of edges between pairs drawn at random, and of all features."""
    chosen = np.random.default_rng(seed).choice(transcripts * metabolites, edges, replace=False)
    pairs = [divmod(int(pair), metabolites) for pair in chosen]
    return edges_table(pairs, seed), features_table(transcripts, metabolites)


def small_network(seed: int = 1) -> nx.Graph:
    """Return a network of 60 edges."""
    return build_network(*random_tables(60, 30, 12, seed), attributes=ATTRIBUTES, seed=1)


def one_edge(labels: tuple[str, str] = ("g", "m"), **more: Any) -> nx.Graph:
    """Return the network of one edge between features of these names; ``more`` are columns of the edge."""
    ends = {"source": labels[0], "source_block": "a", "target": labels[1], "target_block": "b", "r": 0.5}
    edges = pd.DataFrame({name: pd.Series([value], dtype=object) for name, value in (ends | more).items()})
    features = pd.DataFrame({"feature": list(labels), "block": ["a", "b"], "layer": ["one", "two"]})
    return build_network(edges, features, attributes={}, seed=1)


names = st.text(st.characters(), min_size=1, max_size=12) | st.sampled_from(
    [
        "<b>&amp;",
        "]]>",
        "'\"",
        "\x00",
        "\x1b[31m",
        "\ud800",
        "\ufffe",
        "\u202eabc",
        "שלום",
        "🧬",
        "a" * 10_000,
        "\\u0041",
        " ",
    ]
)
"""Feature names: any characters at all, controls and lone surrogates among them."""

cells = st.none() | st.booleans() | st.integers() | st.floats() | names | st.just(pd.NA) | st.just(pd.NaT)
"""Cells of a table: anything, missing values and infinities among it."""

columns = st.dictionaries(names.filter(lambda name: name not in {*EDGE_COLUMNS, "labels"}), cells, max_size=4)
"""Further columns of an edge, under any names."""
