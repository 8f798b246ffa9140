"""A canonical analysis in plain words: how many axes, what they go with, who leads them, how far to trust it."""

from __future__ import annotations

import numpy as np

from workbench.engine import PairTest
from workbench.intake.faults import counted
from workbench.look.words import listed, percent
from workbench.workflow.canonical.canonical_fit import CanonicalFit, LayerFit
from workbench.workflow.canonical.canonical_tables import null_limit

LEADING = 5
SIGNIFICANT = 0.05
TRUSTED = 2.0


def reading(fit: CanonicalFit) -> list[str]:
    """Return the whole reading, a sentence or two a line."""
    lines = [_what(fit), axes_sentence(fit)]
    if fit.test_within is not None:
        lines.append(within_sentence(fit))
    lines.append(private_sentence(fit))
    for k in range(fit.count):
        lines += _component(fit, k)
    lines += [_account(layer, len(fit.layers)) for layer in fit.layers]
    lines += trust_sentences(fit)
    return [line for line in lines if line]


def summary(fit: CanonicalFit) -> list[str]:
    """Return what a command says: the axes, the first component, and how far to trust it."""
    lines = [axes_sentence(fit)]
    if fit.test_within is not None:
        lines.append(within_sentence(fit))
    lines += [private_sentence(fit), _correlation(fit, 0)]
    return [line for line in [*lines, *trust_sentences(fit)] if line]


def axes_sentence(fit: CanonicalFit) -> str:
    """Return how many axes of shared variation the test finds, with its p."""
    test = fit.test
    if test.p is None:
        return f"shared variation: p withheld, {test.withheld}"
    p = ", ".join(f"{value:.3g}" for value in test.p_by_pair if np.isfinite(value))
    tested = f"p = {p} (component by component, {test.permutations} permutations on {fit.units.n} {fit.units.words})"
    axes, layers = fit.axes, listed([layer.matrix.layer for layer in fit.layers])
    if axes == 0:
        return f"no variation shared by {layers} can be told from chance: {tested}"
    more = "" if axes < len(test.p_by_pair) else "; there may be more"
    return f"{counted(axes, 'axis', 'axes')} of variation shared by {layers}{more}: {tested}"


def within_sentence(fit: CanonicalFit) -> str:
    """Return what is left of it inside the groups."""
    test = fit.test_within
    if test is None:
        return ""
    if test.p is None:
        return f"inside the groups: p withheld, {test.withheld}"
    if test.p <= SIGNIFICANT:
        return f"inside the groups as well: p = {test.p:.3g}, {counted(test.axes(), 'axis', 'axes')}"
    if fit.axes:
        return (
            f"inside the groups p = {test.p:.3g}: what is shared may be the group difference alone, "
            "which any two layers that it touches share"
        )
    return f"inside the groups: p = {test.p:.3g}"


def private_sentence(fit: CanonicalFit) -> str:
    """Return what the layers share once each is freed of its private variation; empty where that was not tested."""
    if fit.freed is None:
        return ""
    parts = [
        f"{block}: {counted(one.weights.shape[1], 'component')}, {percent(one.share)} of its variance"
        for block, one in fit.freed.removals.items()
        if one.weights.size
    ]
    inside = "inside the groups, " if fit.test_within is not None else ""
    removed = f"{inside}with private variation removed ({'; '.join(parts)})"
    test = fit.freed.test
    if test.p is None:
        return f"{removed}: p withheld, {test.withheld}"
    told = f"{removed}: p = {test.p:.3g}"
    if test.p > SIGNIFICANT:
        return told
    told += f", {counted(test.axes(), 'axis', 'axes')}"
    if fit.axes == 0:
        return f"{told}: what is shared is buried under private variation; no component below shows it, edges may"
    return told


def trust_sentences(fit: CanonicalFit) -> list[str]:
    """Return what speaks against reading more into the figures than they hold."""
    if fit.without is not None:
        return [fit.without]
    if fit.validated is None:
        return []
    strong = fit.validated.correlations > TRUSTED * fit.validated.errors
    if fit.axes == 0:
        return [
            "the components below chance are shown so that they can be looked at; do not follow their features"
        ]
    weak = [str(k + 1) for k in range(min(fit.axes, fit.count)) if not strong[k]]
    if weak:
        return [
            f"component {', '.join(weak)}: shared by the test, yet its variates do not predict each other in samples "
            "that the fit has not seen; its direction, and so its leading features, are not known well"
        ]
    return []


def _what(fit: CanonicalFit) -> str:
    parts = [
        f"{layer.matrix.layer} ({sum(layer.matrix.sizes):,} features, {layer.matrix.held.size} {fit.units.words})"
        for layer in fit.layers
    ]
    return f"{' against '.join(parts) if len(parts) == 2 else '; '.join(parts)}; {_exchanged(fit.test)}"


def _exchanged(test: PairTest) -> str:
    return f"the test exchanges {test.exchanged}"


def _component(fit: CanonicalFit, k: int) -> list[str]:
    lines = [_correlation(fit, k)]
    goes = _goes_with(fit, k)
    if goes:
        lines.append(f"component {k + 1} goes with {goes}")
    lines += [f"component {k + 1}, leading {layer.matrix.layer}: {leading(layer, k)}" for layer in fit.layers]
    return lines


def _correlation(fit: CanonicalFit, k: int) -> str:
    limit = null_limit(fit)[k]
    band = f" (chance alone reaches {limit:.2f} in 5 of 100)" if np.isfinite(limit) else ""
    line = f"component {k + 1}: correlation of its variates {fit.correlations[k]:.2f} in sample{band}"
    if fit.validated is None:
        return line
    cv, error = fit.validated.correlations[k], fit.validated.errors[k]
    line += f", {cv:.2f} +- {error:.2f} in samples that the fit has not seen (the one to trust)"
    if len(fit.layers) > 2 and k < fit.axes:
        inside = [layer.matrix.layer for layer, has in zip(fit.layers, fit.part[k], strict=True) if has]
        line += f"; shared by {', '.join(inside) if inside else 'no two layers out of sample'}"
    return line


def _goes_with(fit: CanonicalFit, k: int) -> str:
    found = fit.association
    strongest = [
        (found.r2[j, k], column)
        for j, column in enumerate(found.columns)
        if not found.untestable[j] and found.q[j, k] <= SIGNIFICANT
    ]
    named = [f"{column} (R2 {r2:.2f})" for r2, column in sorted(strongest, reverse=True)[:LEADING]]
    return ", ".join(named)


def leading(layer: LayerFit, k: int, count: int = LEADING) -> str:
    """Return the features that go best with the other layers' variate, with their correlation."""
    strength = np.nan_to_num(np.abs(layer.other[:, k]))
    best = np.argsort(-strength, kind="stable")[:count]
    return ", ".join(f"{layer.matrix.features[j]} ({layer.other[j, k]:+.2f})" for j in best)


def _account(layer: LayerFit, layers: int) -> str:
    lines = []
    for block, account in zip(layer.matrix.blocks, layer.accounts, strict=True):
        all_layers = "all" if layers > 2 else "both"
        some = f", {account.shared_by_some:.0%} by some" if layers > 2 else ""
        lines.append(
            f"{block}: {account.shared_by_all:.0%} of its variance is shared by {all_layers} layers{some}, "
            f"{account.private:.0%} its own ({counted(account.private_components, 'component', 'components')}), "
            f"{account.noise:.0%} noise"
        )
    return "; ".join(lines).replace("%", " %")
