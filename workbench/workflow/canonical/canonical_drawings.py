"""What the figures of a canonical analysis show."""

from __future__ import annotations

import numpy as np

from workbench.figures.canonical import CanonicalView, LayerDrawn
from workbench.workflow.canonical.canonical_fit import CanonicalFit
from workbench.workflow.canonical.canonical_tables import PARTS, padded


def canonical_view(fit: CanonicalFit) -> CanonicalView:
    """Return what the figures show of a fit."""
    nothing = np.full(fit.count, np.nan)
    groups = fit.units.groups
    return CanonicalView(
        layers=tuple(
            LayerDrawn(layer.matrix.layer, layer.variates, layer.matrix.features, layer.own, layer.other)
            for layer in fit.layers
        ),
        units=fit.units.words,
        correlations=fit.correlations,
        cross_validated=nothing if fit.validated is None else fit.validated.correlations,
        errors=nothing if fit.validated is None else fit.validated.errors,
        null=fit.null,
        p=padded(fit.test, fit.count),
        axes=fit.axes,
        groups=() if groups is None else tuple(groups.levels[code] for code in groups.codes),
        levels=() if groups is None else tuple(groups.levels),
        accounts=tuple(
            (block, tuple(getattr(account, name) for name in PARTS.values()))
            for layer in fit.layers
            for block, account in zip(layer.matrix.blocks, layer.accounts, strict=True)
        ),
        association=fit.association,
    )
