"""The numbers behind the figures as plain tables, one for each file."""

from __future__ import annotations

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from workbench.look.between import BetweenLook, PairLook
from workbench.look.block import BlockLook
from workbench.look.gaps import QUANTILES
from workbench.look.reading import flag_words

FloatArray = NDArray[np.float64]


def look_tables(look: BlockLook) -> dict[str, pd.DataFrame]:
    """Tables of one block by file name without ending.

    ``explained`` one row per component; ``numbers`` each suggestion for the number of components and its
    reason; ``scores``, ``loadings`` (with correlations), ``association``, ``samples`` (distances, limits, what to
    check), ``distributions``, and ``gaps`` by feature where measured values were given.
    """
    tables = {
        "explained": _explained(look),
        "numbers": _numbers(look),
        "scores": _scores(look),
        "loadings": _loadings(look),
        "association": _association(look),
        "samples": _samples(look),
        "distributions": _distributions(look),
    }
    if look.gaps is not None:
        gaps = {"missing_share": look.gaps.by_feature, "abundance": look.gaps.abundance}
        tables["gaps"] = pd.DataFrame({"feature": look.measured_features, **gaps})
    return tables


def _padded(values: FloatArray, size: int, start: int = 0) -> FloatArray:
    """Return the first values of a column that may be shorter or longer than the table, NaN after its end."""
    column = np.full(size, np.nan)
    held = values[start : start + size]
    column[: held.size] = held
    return column


def _explained(look: BlockLook) -> pd.DataFrame:
    found, count = look.number, look.eigenvalues.size
    crossed = found.cross_validated.errors if found.cross_validated is not None else np.empty(0)
    at = np.arange(1, count + 1)
    columns = {
        "component": at,
        "variance": look.eigenvalues,
        "share": look.shares,
        "cumulative": look.cumulative,
        "carries_signal": at <= found.number,
        "noise_p": _padded(found.signal.p_values, count),
        "share_in_signal_space": found.shares,
        "parallel_limit": found.parallel.limits,
        "parallel_mean": found.parallel.means,
        "cross_validated_error": _padded(crossed, count, start=1),
    }
    return pd.DataFrame(columns)


def _numbers(look: BlockLook) -> pd.DataFrame:
    found = look.number
    rows = [
        ("signal", found.number, found.rule),
        ("elbow", found.elbow.number, found.elbow.reason),
        ("parallel_analysis", found.parallel.number, f"95 % point of {found.parallel.draws} permuted blocks"),
    ]
    if (crossed := found.cross_validated) is not None:
        how = f"smallest error over {crossed.repeats} x {crossed.folds} folds of samples, halves of features"
        rows.append(("cross_validation", crossed.number, how))
    return pd.DataFrame(rows, columns=["rule", "number", "reason"])


def _scores(look: BlockLook) -> pd.DataFrame:
    columns = {f"component_{k}": look.scores[:, k - 1] for k in range(1, look.scores.shape[1] + 1)}
    return pd.DataFrame({"sample": look.samples, **columns})


def _loadings(look: BlockLook) -> pd.DataFrame:
    count = look.loadings.shape[1]
    loadings = {f"loading_{k}": look.loadings[:, k - 1] for k in range(1, count + 1)}
    correlations = {f"correlation_{k}": look.correlations[:, k - 1] for k in range(1, count + 1)}
    return pd.DataFrame({"feature": look.features, **loadings, **correlations})


def _association(look: BlockLook) -> pd.DataFrame:
    found = look.association
    rows = [
        (name, k + 1, *(figure[j, k] for figure in (found.r2, found.r2_adjusted, found.p, found.q)), found.n[j],
         found.df[j], found.untestable[j])
        for j, name in enumerate(found.columns)
        for k in range(found.r2.shape[1])
    ]  # fmt: skip
    names = ["column", "component", "r2", "r2_adjusted", "p", "q", "n", "df", "not_tested_because"]
    return pd.DataFrame(rows, columns=names)


def _samples(look: BlockLook) -> pd.DataFrame:
    found = look.distances
    reasons = [
        "; ".join(flag_words(f) for f in look.flags if f.sample == i) for i in range(len(look.samples))
    ]
    limits = {
        f"{what}_limit_{100 * level:.0f}": limit
        for what, values in (("t2", found.t2_limits), ("spe", found.spe_limits))
        for level, limit in zip(found.levels, values, strict=True)
    }
    noise = look.number.signal.sample_noise
    return pd.DataFrame(
        {
            "sample": look.samples,
            "t2": found.t2,
            "spe": found.spe,
            **limits,
            "relative_noise": noise,
            "check": reasons,
        }
    )


def _distributions(look: BlockLook) -> pd.DataFrame:
    found = look.distributions
    columns: dict[str, object] = {"sample": look.samples}
    for what, values in (("measured", found.measured), ("prepared", found.prepared)):
        if values is not None:
            columns |= {f"{what}_{100 * q:.0f}": values[:, i] for i, q in enumerate(QUANTILES)}
    return pd.DataFrame(columns)


def between_table(look: BetweenLook) -> pd.DataFrame:
    """Table of the agreement of every two blocks."""
    return pd.DataFrame([_pair_row(pair) for pair in look.pairs], columns=list(_PAIR_COLUMNS))


_PAIR_COLUMNS = (
    "block", "other_block", "n", "rv", "rv_expected", "rv_adjusted", "rv_p", "procrustes", "procrustes_expected",
    "procrustes_p", "dimensions", "other_dimensions", "permutations", "smallest_p", "reason",
)  # fmt: skip


def _pair_row(pair: PairLook) -> dict[str, object]:
    row: dict[str, object] = {
        "block": pair.one,
        "other_block": pair.other,
        "n": pair.n,
        "reason": pair.reason,
    }
    if pair.found is None:
        return row
    figures = [name for name in _PAIR_COLUMNS if hasattr(pair.found, name) and name != "dimensions"]
    row |= {name: getattr(pair.found, name) for name in figures}
    row["dimensions"], row["other_dimensions"] = pair.found.dimensions
    return row
