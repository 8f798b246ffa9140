"""What preparation did to a block, step by step where it changed much: scale of the samples, levels, drift."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.errors import InputError
from workbench.look.gaps import QUANTILES
from workbench.look.view import BlockView, Levels
from workbench.prepare import DriftEffect, StepAccount
from workbench.prepare.local_lines import medians

FloatArray = NDArray[np.float64]

SCALE_WORDS = {"counts": "size factor", "intensities": "concentration", "log": "shift"}
ON_LOGARITHMS = ("counts", "intensities", "proportions", "log")
UNCHANGED = 1e-9
MOST_WARNINGS = 3


@dataclass(frozen=True, eq=False)
class PreparationLook:
    """What preparation did to the samples and the runs of one block.

    Attributes
    ----------
    name, layer, values : str
        Block name, biological kind, and what its delivered numbers are.
    samples, features : tuple of str
        Rows and columns of the prepared block.
    groups, shapes : Levels or None
        What colours and what shapes the marks of the samples.
    scale : ndarray of shape (n_samples,)
        What was taken from each sample's logarithms (log2 of its size factor or dilution, shift of its median).
    total : ndarray of shape (n_samples,)
        Sum of the sample's measured values; median of logarithms.
    before, after : ndarray of shape (n_samples, 5) or None
        Quantiles (5, 25, 50, 75, 95 %), over the features that are left and were measured in the sample, of its
        deviations from the features' medians; None where values are no logarithms and become none.
    imputed : ndarray of shape (n_samples,)
        Share of filled-in values of each sample.
    imputed_of_feature : ndarray of shape (n_features,)
    drift : DriftEffect or None
        None without a step that takes drift away, or without pools.
    account : tuple of StepAccount
        What each step did.
    """

    name: str
    layer: str
    values: str
    samples: tuple[str, ...]
    features: tuple[str, ...]
    groups: Levels | None
    shapes: Levels | None
    scale: FloatArray
    total: FloatArray
    before: FloatArray | None
    after: FloatArray | None
    imputed: FloatArray
    imputed_of_feature: FloatArray
    drift: DriftEffect | None
    account: tuple[StepAccount, ...]

    @property
    def scale_word(self) -> str:
        """What the scale of a sample is called."""
        return SCALE_WORDS.get(self.values, "scale")

    @property
    def scaled(self) -> bool:
        """Whether samples were scaled at all."""
        return bool(np.ptp(self.scale) > UNCHANGED)


def look_at_preparation(
    view: BlockView,
    scale: FloatArray,
    account: Sequence[StepAccount],
    drift: DriftEffect | None = None,
    shapes: Levels | None = None,
) -> PreparationLook:
    """Return what preparation did to a block.

    Parameters
    ----------
    view : BlockView
        The block, with its measured values.
    scale : ndarray of shape (n_samples,)
        Column ``log2_scale`` of the prepared block.
    account : sequence of StepAccount
    drift : DriftEffect, optional
    shapes : Levels, optional
        What shapes the marks of the samples.

    Raises
    ------
    InputError
        When the view has no measured values.
    """
    if view.measured is None:
        raise InputError(
            f"block '{view.name}': what preparation did cannot be seen without the measured values"
        )
    imputed = np.zeros(view.prepared.shape, dtype=bool) if view.imputed is None else view.imputed
    before, after = _levels(view, imputed)
    return PreparationLook(
        name=view.name,
        layer=view.layer,
        values=view.values,
        samples=view.samples,
        features=view.features,
        groups=view.groups,
        shapes=shapes,
        scale=np.asarray(scale, dtype=np.float64),
        total=_totals(view.measured, view.values),
        before=before,
        after=after,
        imputed=imputed.mean(axis=1),
        imputed_of_feature=imputed.mean(axis=0),
        drift=drift,
        account=tuple(account),
    )


def _totals(measured: FloatArray, values: str) -> FloatArray:
    """Return each sample's sum of values, its median where they are logarithms; 0 for a sample without any."""
    if values != "log":
        totals: FloatArray = np.nansum(measured, axis=1)
        return totals
    rows = (row[~np.isnan(row)] for row in measured)
    return np.array([float(np.median(row)) if row.size else 0.0 for row in rows])


def _levels(view: BlockView, imputed: NDArray[np.bool_]) -> tuple[FloatArray | None, FloatArray | None]:
    if view.values not in ON_LOGARITHMS or view.measured is None:
        return None, None
    place = {name: column for column, name in enumerate(view.names_measured)}
    columns = [place[name] for name in view.features]
    measured = _logarithms(view.measured[:, columns], view)
    lacking = np.isnan(measured) | imputed
    before, after = (_deviations(np.where(lacking, np.nan, values)) for values in (measured, view.prepared))
    return before, after


def _logarithms(measured: FloatArray, view: BlockView) -> FloatArray:
    """Return measured values on the scale of the prepared ones; parts of a whole have natural logarithms."""
    if view.values == "log":
        return measured
    whole = view.values == "proportions" or (view.layer, view.values) == ("microbes", "counts")
    logs = (np.log if whole else np.log2)(measured, where=measured > 0, out=np.full(measured.shape, np.nan))
    return np.asarray(logs)


def _deviations(logs: FloatArray) -> FloatArray:
    """Return quantiles, over the features that a sample has, of its deviations from the features' medians."""
    held = ~np.isnan(logs).all(axis=0)
    logs = logs[:, held]
    deviations = logs - medians(logs) if logs.size else logs
    rows = [row[~np.isnan(row)] for row in deviations]
    return np.array(
        [np.quantile(row, QUANTILES) if row.size else np.full(len(QUANTILES), np.nan) for row in rows]
    )


def preparation_reading(look: PreparationLook) -> tuple[str, ...]:
    """Return what preparation warns of, a line each, at most three lines; none without a warning."""
    told = [
        f"Preparation warns ({step.step}): {caution}." for step in look.account for caution in step.cautions
    ]
    if len(told) > MOST_WARNINGS:
        told[MOST_WARNINGS - 1 :] = [
            f"{len(told) - MOST_WARNINGS + 1} more warnings of the preparation: preparation.md."
        ]
    return tuple(told)


def preparation_tables(look: PreparationLook) -> dict[str, pd.DataFrame]:
    """Return the numbers behind the figures, and what became of every sample and feature, by file name.

    ``prepared_samples`` scale, total, share filled in and levels of every sample; ``prepared_features`` every
    measured feature that a step dropped with the reason, every other one with its share of filled-in values and,
    where there are pools, its drift; ``drift_runs`` the runs of the features that the figure draws.
    """
    tables = {"prepared_samples": _samples(look), "prepared_features": _features(look)}
    if look.drift is not None and look.drift.shown:
        tables["drift_runs"] = _drift_runs(look.drift)
    return tables


def _samples(look: PreparationLook) -> pd.DataFrame:
    groups = [""] * len(look.samples)
    if look.groups is not None:
        groups = [look.groups.levels[code] if code >= 0 else "" for code in look.groups.codes]
    columns: dict[str, object] = {
        "sample": look.samples,
        "group": groups,
    }
    if look.before is not None:
        columns["total_measured" if look.values != "log" else "median_measured"] = look.total
    columns |= {"log2_scale": look.scale, "scale": 2.0**look.scale, "imputed_share": look.imputed}
    for when, levels in (("before", look.before), ("after", look.after)):
        if levels is not None:
            columns |= {f"deviation_{when}_{100 * q:.0f}": levels[:, i] for i, q in enumerate(QUANTILES)}
    return pd.DataFrame(columns)


def _features(look: PreparationLook) -> pd.DataFrame:
    left = pd.DataFrame({"feature": look.features, "dropped_by": "", "reason": ""})
    left["imputed_share"] = look.imputed_of_feature
    dropped = pd.DataFrame(
        [(feature, step.step, why) for step in look.account for feature, why in step.dropped.items()],
        columns=["feature", "dropped_by", "reason"],
    )
    table = pd.concat([left, dropped], ignore_index=True) if len(dropped) else left
    if look.drift is None:
        return table
    drift = pd.DataFrame(
        {
            "drift": look.drift.courses,
            "drift_range_log2": look.drift.moved,
            "pool_scatter_before": look.drift.scatter_before,
            "pool_scatter_after": look.drift.scatter_after,
        },
        index=pd.Index(look.drift.features),
    )
    return table.join(drift, on="feature")


def _drift_runs(effect: DriftEffect) -> pd.DataFrame:
    runs, parts = effect.runs, []
    for place, feature in enumerate(effect.shown):
        parts.append(
            pd.DataFrame(
                {
                    "feature": effect.features[feature],
                    "run": runs.runs,
                    "role": runs.role,
                    "batch": runs.batch,
                    "order": runs.order,
                    "log2_before": effect.before[:, place],
                    "log2_drift": effect.course[:, place],
                    "log2_after": effect.after[:, place],
                }
            )
        )
    return pd.concat(parts, ignore_index=True)
