"""components.tsv, explained.tsv, association.tsv and model.h5 of a canonical analysis."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.engine import PairTest
from workbench.workflow.canonical.canonical_fit import CanonicalFit, LayerFit
from workbench.workflow.model_file import BlockModel, LayerModel, ModelFile

FloatArray = NDArray[np.float64]
PARTS = {
    "shared": "shared_by_all",
    "shared by some": "shared_by_some",
    "private": "private",
    "noise": "noise",
}


def components_table(fit: CanonicalFit) -> pd.DataFrame:
    """Return components.tsv: correlation in and out of sample, cumulated p, and which layers have the component."""
    count = fit.count
    nothing = np.full(count, np.nan)
    table = pd.DataFrame(
        {
            "component": np.arange(1, count + 1),
            "correlation": fit.correlations,
            "correlation_cv": nothing if fit.validated is None else fit.validated.correlations,
            "correlation_cv_error": nothing if fit.validated is None else fit.validated.errors,
            "null_high": null_limit(fit),
            "p": padded(fit.test, count),
        }
    )
    if fit.test_within is not None:
        table["p_within"] = padded(fit.test_within, count)
    if fit.freed is not None:
        table["p_without_private"] = padded(fit.freed.test, count)
    if len(fit.layers) > 2:
        names = [layer.matrix.layer for layer in fit.layers]
        table["layers"] = [
            ", ".join(name for name, has in zip(names, row, strict=True) if has) for row in fit.part
        ]
    return table


def null_limit(fit: CanonicalFit) -> FloatArray:
    """Return the in-sample correlation that 95 of 100 fits to rearranged rows stay under, component by component."""
    known = np.isfinite(fit.null).all(axis=1)
    if not known.any():
        return np.full(fit.count, np.nan)
    limit: FloatArray = np.quantile(fit.null[known], 0.95, axis=0)
    return limit


def padded(test: PairTest, count: int) -> FloatArray:
    """Return the cumulated p of the first components, NaN for those that were not tested."""
    found = np.full(count, np.nan)
    p = test.p_by_pair[:count]
    found[: p.size] = p
    return found


def explained_table(fit: CanonicalFit) -> pd.DataFrame:
    """Return explained.tsv: shares of each block's adjusted variance.

    ``component``: of each component's own variate, beyond those before it (fitted to this block: high by nature);
    ``shared``, ``shared by some``, ``private``, ``noise``: the account, which adds up to 1 and has no component.
    """
    rows: list[tuple[object, str, str, float]] = []
    for layer in fit.layers:
        for k, shares in enumerate(layer.explained):
            rows += [
                (k + 1, block, "component", share)
                for block, share in zip(layer.matrix.blocks, shares, strict=True)
            ]
    for layer in fit.layers:
        for block, account in zip(layer.matrix.blocks, layer.accounts, strict=True):
            rows += [
                (pd.NA, block, part, getattr(account, name))
                for part, name in PARTS.items()
                if part != "shared by some" or len(fit.layers) > 2
            ]
    table = pd.DataFrame(rows, columns=["component", "block", "part", "share"])
    table["component"] = table["component"].astype("Int64")
    return table.sort_values("component", kind="stable", ignore_index=True)


def association_table(fit: CanonicalFit) -> pd.DataFrame:
    """Return association.tsv: what each component (mean over the layers) goes with in the sample sheet."""
    found = fit.association
    rows = [
        (column, k + 1, found.r2[j, k], found.p[j, k], found.q[j, k], found.n[j])
        for j, column in enumerate(found.columns)
        for k in range(fit.count)
        if not found.untestable[j]
    ]
    return pd.DataFrame(rows, columns=["column", "component", "r2", "p", "q", "n"])


def model_of(fit: CanonicalFit) -> ModelFile:
    """Return the fit as model.h5 holds it."""
    blocks = {}
    for layer in fit.layers:
        ends = np.cumsum(layer.matrix.sizes)
        for name, end, size in zip(layer.matrix.blocks, ends, layer.matrix.sizes, strict=True):
            blocks[name] = _block(layer, slice(int(end - size), int(end)))
    layers = {
        layer.matrix.layer: LayerModel(layer.variates, float(layer.ridge), float(layer.noise_level))
        for layer in fit.layers
    }
    cv = None if fit.validated is None else fit.validated.correlations
    return ModelFile(fit.method, fit.units.names, blocks, fit.correlations, cv, layers)


def _block(layer: LayerFit, inside: slice) -> BlockModel:
    return BlockModel(
        layer.matrix.layer,
        layer.matrix.features[inside],
        layer.own[inside],
        layer.other[inside],
        layer.weights[inside],
    )
