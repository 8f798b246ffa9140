"""What a careful reader would ask of a preparation: samples scaled far from the rest, groups scaled apart."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import stats

from workbench.errors import InputError
from workbench.prepare.tables import Matrix, PreparedTable, StepAccount
from workbench.prepare.words import percent, some

FAR_FOLD = 3.0
FAR_SPREADS = 4.0
NORMAL_MAD = 1.4826
GROUP_LEVEL = 0.01
APART_FOLD = 1.25
APART_SHARE = 0.05
FAR_LEVEL = 0.05
FAR_APART_FOLD = 1.5
FAR_APART_SHARE = 0.1
MOST = 0.5
CHANGED_SDS = 0.5
ROUNDING = 1e-12


@dataclass(frozen=True)
class Usual:
    """What sample scales of a block are like: log2 of the typical one, and how far from it is far.

    Far is more than threefold, and more than four robust standard deviations (1.4826 times the median absolute
    deviation) of the training samples.
    """

    centre: float
    limit: float

    @classmethod
    def of(cls, logs: Matrix) -> Usual:
        """Return the usual scale of the training samples.

        >>> Usual.of(np.array([0.0, 0.1, -0.1, 5.0])).far(np.array([5.0, 0.0]), ("S1", "S2"))
        ('S1',)
        """
        if not logs.size:
            return cls(0.0, np.inf)
        centre = float(np.median(logs))
        spread = NORMAL_MAD * float(np.median(np.abs(logs - centre)))
        return cls(centre, max(float(np.log2(FAR_FOLD)), FAR_SPREADS * spread))

    def far(self, logs: Matrix, samples: Sequence[str]) -> tuple[str, ...]:
        """Return the samples whose scale is far from the usual one."""
        return tuple(samples[row] for row in np.flatnonzero(np.abs(logs - self.centre) > self.limit).tolist())

    def cautions(self, what: str, logs: Matrix, samples: Sequence[str]) -> tuple[str, ...]:
        """Return a caution that names the far samples; none without any."""
        far = self.far(logs, samples)
        if not far:
            return ()
        folds = 2.0 ** (logs[[samples.index(name) for name in far]] - self.centre)
        told = ", ".join(f"{fold:.3g}" for fold in folds[:3])
        return (f"{what} far from the rest in {some(far)} ({told} times the typical one)",)


@dataclass(frozen=True)
class GroupDifference:
    """How the groups differ in a figure of the samples.

    Attributes
    ----------
    figure : str
        ``scale`` (log2 of size factor or dilution) or ``imputed`` (share of values filled in).
    means : tuple of float
        Mean of the figure in each group.
    difference : float
        Largest less smallest mean.
    p : float
        Two-sided p of equal means: Welch's t of two groups, F of more. NaN where a group has fewer than two samples.
    changed_share : float
        ``scale`` only: share of features whose group difference the scaling changed by more than half of their
        standard deviation within groups. NaN otherwise.
    """

    figure: str
    means: tuple[float, ...]
    difference: float
    p: float
    changed_share: float


def group_differences(prepared: PreparedTable, groups: NDArray[np.int_]) -> tuple[GroupDifference, ...]:
    """Return how far the groups differ in what was taken from their samples, and in how much was filled in.

    A size factor that differs between groups moves the group difference of every feature by the same amount on
    the log scale. That is right where depth or dilution caused it, and wrong where most features truly changed;
    the numbers cannot tell which. Preparation itself never sees the groups: this is for the caller who does.

    Parameters
    ----------
    prepared : PreparedTable
        The samples.
    groups : int ndarray of shape (n_samples,)
        The group of each sample; negative: none.

    Raises
    ------
    InputError
        When there is not one group per sample.
    """
    if len(groups) != len(prepared.samples):
        raise InputError(f"{len(groups)} groups for {len(prepared.samples)} samples; give one for each")
    known = groups >= 0
    codes, values = groups[known], prepared.values[known]
    scale = prepared.scale[known]
    changed = _changed_share(values, scale, codes)
    share = prepared.imputed[known].mean(axis=1) if prepared.features else np.zeros(known.sum())
    return (_difference("scale", scale, codes, changed), _difference("imputed", share, codes, float("nan")))


def group_cautions(
    prepared: PreparedTable, groups: NDArray[np.int_], levels: Sequence[str]
) -> tuple[str, ...]:
    """Return a sentence for each way in which preparation and groups are tangled; none where they are not.

    Told are a scale whose group means differ with p under 0.01, and 1.25-fold or enough to change the group
    difference of most features by half a standard deviation; and shares of imputed values that differ by five
    points or more with p under 0.01. Of differences of 1.5-fold and of ten points p under 0.05 is enough: with six
    samples a group, 0.01 would let every fourth study with twice the depth in one group pass unsaid.

    References
    ----------
    Thresholds: common practice.
    """
    scale, imputed = group_differences(prepared, groups)
    told = []
    apart = scale.difference >= np.log2(APART_FOLD) or scale.changed_share > MOST
    far = scale.difference >= np.log2(FAR_APART_FOLD)
    if (apart and scale.p < GROUP_LEVEL) or (far and scale.p < FAR_LEVEL):
        told.append(
            f"depth or dilution differs between the groups ({_means(scale, levels, 2.0)} times the typical sample): "
            f"scaling changed the group difference of {percent(scale.changed_share)} of the features by more than half "
            "of their standard deviation; differences of weak features between these groups rest on it (pairs within "
            "groups do not)"
        )
    apart, far = imputed.difference >= APART_SHARE, imputed.difference >= FAR_APART_SHARE
    if (apart and imputed.p < GROUP_LEVEL) or (far and imputed.p < FAR_LEVEL):
        told.append(
            f"the share of filled-in values differs between the groups ({_means(imputed, levels)}): differences of "
            "features with gaps between these groups may come from the gaps, and no filling in can part the two"
        )
    return tuple(told)


def group_account(prepared: PreparedTable, groups: NDArray[np.int_], levels: Sequence[str]) -> StepAccount:
    """Return how preparation and groups meet, as the last entry of an account.

    Parameters
    ----------
    prepared : PreparedTable
    groups : int ndarray of shape (n_samples,)
        The group of each sample; negative: none.
    levels : sequence of str
        Names of the groups.
    """
    scale, imputed = group_differences(prepared, groups)
    scaled = "samples were not scaled"
    if np.ptp(prepared.scale) > 0:
        scaled = (
            f"scale of a sample, in times the typical one: {_means(scale, levels, 2.0)}{_p_words(scale.p)}"
        )
    filled = "nothing was filled in"
    if prepared.imputed.any():
        filled = f"share filled in: {_means(imputed, levels)}{_p_words(imputed.p)}"
    return StepAccount(
        "groups",
        f"{scaled}; {filled}",
        cautions=group_cautions(prepared, groups, levels),
        rule="changes nothing: compares the groups in how far their samples were scaled and how much was filled in",
        why="no step knows the groups; but where they were read to unequal depth, diluted unequally or have unequal "
        "gaps, scaling and filling in can make a difference between them, or hide one",
    )


def _p_words(p: float) -> str:
    return f" (p {p:.2g} of such a difference by chance)" if np.isfinite(p) else ""


def imputed_shares(prepared: PreparedTable) -> tuple[dict[str, float], dict[str, float]]:
    """Return the share of filled-in values of every sample and of every feature."""
    n, p = prepared.imputed.shape
    rows, columns = prepared.imputed.sum(axis=1) / max(p, 1), prepared.imputed.sum(axis=0) / max(n, 1)
    return (
        dict(zip(prepared.samples, rows.tolist(), strict=True)),
        dict(zip(prepared.features, columns.tolist(), strict=True)),
    )


def _difference(figure: str, values: Matrix, codes: NDArray[np.int_], changed: float) -> GroupDifference:
    parts = [values[codes == code] for code in np.unique(codes)]
    means = tuple(float(part.mean()) for part in parts)
    difference = max(means) - min(means) if means else 0.0
    return GroupDifference(figure, means, difference, _p_of(parts, difference), changed)


def _p_of(parts: list[Matrix], difference: float) -> float:
    if len(parts) < 2 or min(len(part) for part in parts) < 2:
        return float("nan")
    noise = ROUNDING * max(1.0, *(float(np.abs(part).max()) for part in parts))
    if max(float(np.ptp(part)) for part in parts) <= noise:
        return 0.0 if difference > noise else 1.0
    if len(parts) == 2:
        # From means and deviations: on a group without spread the test of the values warns of lost precision.
        one, two = ((float(part.mean()), float(part.std(ddof=1)), len(part)) for part in parts)
        return float(stats.ttest_ind_from_stats(*one, *two, equal_var=False).pvalue)
    return float(stats.f_oneway(*parts).pvalue)


def _changed_share(values: Matrix, scale: Matrix, codes: NDArray[np.int_]) -> float:
    """Return the share of features whose spread within groups is less than twice the difference in scale."""
    levels = np.unique(codes)
    if len(levels) < 2 or not values.shape[1] or len(codes) <= len(levels):
        return float("nan")
    centred = (
        values
        - np.array([values[codes == code].mean(axis=0) for code in levels])[np.searchsorted(levels, codes)]
    )
    sd = np.sqrt((centred**2).sum(axis=0) / (len(codes) - len(levels)))
    means = [float(scale[codes == code].mean()) for code in levels]
    return float(np.mean(max(means) - min(means) > CHANGED_SDS * sd))


def _means(difference: GroupDifference, levels: Sequence[str], base: float | None = None) -> str:
    means = difference.means
    if base is None:
        return ", ".join(f"{level}: {percent(mean)}" for level, mean in zip(levels, means, strict=True))
    middle = float(np.mean(means))
    return ", ".join(
        f"{level}: {base ** (mean - middle):.2f}" for level, mean in zip(levels, means, strict=True)
    )
