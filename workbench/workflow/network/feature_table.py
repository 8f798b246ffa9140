"""features.tsv: every feature of an analysis with its place in the network, its group effect and its gaps."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from workbench.engine import GroupEffects
from workbench.engine.evidence.clusters import near_duplicates
from workbench.intake import Groups
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.loaded_block import LoadedBlock
from workbench.workflow.model_file import read_model
from workbench.workflow.network.group_differences import group_differences
from workbench.workflow.state import ProjectState

LABEL_COLUMNS = ("label", "symbol", "gene_symbol", "gene_name", "name", "compound", "metabolite")
OWN_COLUMNS = ("kind", "levels", "origin")


def features_table(view: AnalysisView) -> pd.DataFrame:
    """Return one row per prepared feature of the analysis, blocks in their order."""
    tables = [block_features(view, block) for block in view.blocks.values()]
    identifiers = [column for table in tables for column in table.attrs["identifiers"]]
    ordered = [column for column in tables[0] if column not in tables[0].attrs["identifiers"]]
    joined = pd.concat([pd.DataFrame(table.to_dict("series")) for table in tables], ignore_index=True)
    return joined[[*ordered, *dict.fromkeys(identifiers)]]


def block_features(view: AnalysisView, block: LoadedBlock) -> pd.DataFrame:
    """Return the rows of one block: names, group effect with p and q, mean, gaps, identifier columns."""
    shared = view.shared([block.name])
    rows = block.rows(shared.samples)
    values = block.values[rows]
    measured = block.measured_rows(list(shared.samples))
    missing = dict(zip(measured.features, np.isnan(measured.values).mean(axis=0), strict=True))
    identifiers = [str(column) for column in block.annotations if column not in OWN_COLUMNS]
    labels = _labels(block, identifiers)
    table = pd.DataFrame(
        {"feature": block.features, "block": block.name, "layer": block.layer, "label": labels}
    )
    table["cluster"] = _clusters(block.features, values, shared.within)
    if shared.groups is not None:
        for column, cells in _group_columns(group_differences(values, shared), shared.groups).items():
            table[column] = cells
    table["mean"] = values.mean(axis=0)
    table["missing_share"] = [missing[origin] for origin in block.annotations.get("origin", block.features)]
    table["imputed_share"] = block.imputed[rows].mean(axis=0)
    for column in identifiers:
        table[column] = block.annotations[column].astype(str).to_numpy()
    table.attrs["identifiers"] = identifiers
    return table


def _clusters(features: tuple[str, ...], values: np.ndarray, design: np.ndarray) -> list[str]:
    """Return for each feature the one that leads its cluster of near-duplicates; empty for a feature alone."""
    order = np.argsort(np.argsort(np.array(features)))
    found = near_duplicates(values, design, order=order)
    return [
        features[leader] if size > 1 else "" for leader, size in zip(found.leader, found.size, strict=True)
    ]


def _group_columns(found: GroupEffects | None, groups: Groups) -> dict[str, Any]:
    if found is None:
        return {"group_effect": np.nan, "group_level": "", "group_p": np.nan, "group_q": np.nan}
    level = [groups.levels[code] if code >= 0 else "" for code in found.level]
    return {"group_effect": found.effect, "group_level": level, "group_p": found.p, "group_q": found.q}


def _labels(block: LoadedBlock, identifiers: list[str]) -> list[str]:
    by_lower = {column.lower(): column for column in identifiers}
    for wanted in LABEL_COLUMNS:
        if wanted in by_lower:
            named = block.annotations[by_lower[wanted]].astype(str)
            return [label or feature for label, feature in zip(named, block.features, strict=True)]
    return list(block.features)


def canonical_correlations(state: ProjectState, analysis: str) -> pd.DataFrame:
    """Return the correlations of each feature with both variates of each canonical pair.

    Columns ``pair1_own``, ``pair1_other``, ...; the index is (block, feature).  Out-of-sample canonical
    correlations stand in ``attrs["correlations_cv"]`` (None where they could not be had).
    """
    model = read_model(state, analysis)
    table = model.feature_columns()
    table.attrs["correlations_cv"] = model.correlation_cv
    return table


def implied_correlations(edges: pd.DataFrame, canonical: pd.DataFrame) -> pd.DataFrame:
    """Return ``model_r`` and ``component`` of each edge: what the fitted canonical pairs imply.

    ``model_r = sum_k corr(x, u_k) rho_k corr(y, v_k)`` with the out-of-sample ``rho_k`` (negative ones count
    as 0); ``component`` is the pair that carries most of it.  The group is left in, as in ``r_total``.
    """
    rho = canonical.attrs["correlations_cv"]
    own = canonical[[column for column in canonical.columns if str(column).endswith("_own")]]
    ends = [
        own.reindex(pd.MultiIndex.from_frame(edges[[f"{end}_block", end]])).to_numpy()
        for end in ("source", "target")
    ]
    if rho is None:
        return pd.DataFrame({"model_r": np.nan, "component": pd.NA}, index=edges.index)
    terms = ends[0] * np.maximum(np.nan_to_num(rho), 0.0) * ends[1]
    carried = np.abs(np.nan_to_num(terms)).argmax(axis=1) + 1 if len(edges) else np.zeros(0, dtype=int)
    return pd.DataFrame({"model_r": terms.sum(axis=1), "component": carried}, index=edges.index)
