"""Gaps that follow the group or a run day: what looks like biology may be a limit of detection that moved."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.evidence import GapShares
from workbench.checks.finding import Finding, accept_line, adjust_line, finding_id
from workbench.checks.sheet_columns import SheetColumn, read_column
from workbench.checks.words import small, some
from workbench.intake.faults import counted

FloatArray = NDArray[np.float64]

CHECK = "gaps_follow"
LEVEL = 0.01
DRAWS = 999
FEWEST_GAPS, FEWEST_SAMPLES = 3, 8
FEWEST_PER_LEVEL = 3
APART = 0.5
LEAST_APART, LEAST_APART_SHARE = 3, 0.10
MOST_LEVELS = 12
MOST_DRAWN = 30


@dataclass(frozen=True, eq=False)
class Follows:
    """How gaps follow a column: p over permuted samples, the features whose levels are far apart, their shares."""

    p: float
    features: NDArray[np.intp]
    shares: FloatArray
    tested: int


def gap_patterns(data: StudyData) -> list[Finding]:
    """Find blocks whose missing values follow the group or a batch column.

    Features with at least three gaps and three values are looked at. The statistic is the sum of their
    chi-squared figures against the column; its p comes from permuted samples. Reported when p, over all
    columns and blocks, is at most 0.01 and at least three features, and a tenth of those looked at, have missing
    shares that differ by half or more between two levels of at least three samples.
    """
    asked = [(block, column) for block in data.blocks.values() for column in _columns(data, block)]
    found = []
    for place, (block, column) in enumerate(asked):
        rng = np.random.default_rng([data.seed, place])
        follows = gaps_against(_missing(block), column.codes, len(column.levels), rng)
        if follows is not None and _telling(follows, len(asked)):
            found.append(_finding(block, column, follows))
    return found


def _telling(follows: Follows, tests: int) -> bool:
    least = max(LEAST_APART, LEAST_APART_SHARE * follows.tested)
    smallest = max(LEVEL / tests, 1.0 / (DRAWS + 1))
    return follows.p <= smallest and follows.features.size >= least


def _missing(block: CheckedBlock) -> NDArray[np.bool_]:
    missing = np.isnan(block.measured)
    return missing | (block.measured == 0) if block.values == "intensities" else missing


def _columns(data: StudyData, block: CheckedBlock) -> list[SheetColumn]:
    """Return the group, and technical columns of classes, whether adjusted for or not."""
    columns = []
    if len(block.group_levels) > 1:
        name = "+".join(data.settings.samples.group)
        columns.append(SheetColumn(name, False, None, block.group_codes, block.group_levels))
    own = {*data.settings.samples.group, data.settings.samples.id, data.settings.samples.subject}
    for name in map(str, block.columns.columns):
        read = (
            None
            if name in own
            else read_column(name, block.columns[name], data.settings.samples.kinds.get(name))
        )
        if (
            read is not None
            and 1 < len(read.levels) <= MOST_LEVELS
            and (read.technical or name in block.adjust)
        ):
            columns.append(read)
    return columns


def gaps_against(
    missing: NDArray[np.bool_], codes: NDArray[np.intp], n_levels: int, rng: np.random.Generator
) -> Follows | None:
    """Return how missing values follow classes of the samples; None where too few can be looked at.

    Parameters
    ----------
    missing : ndarray of bool, shape (n_samples, n_features)
    codes : ndarray of int, shape (n_samples,)
        -1 for samples without a class; classes of fewer than three samples are left out.
    n_levels : int
    rng : Generator
        For the permutations.
    """
    sizes = np.bincount(codes[codes >= 0], minlength=n_levels)
    large = np.flatnonzero(sizes >= FEWEST_PER_LEVEL)
    rows = np.flatnonzero(np.isin(codes, large))
    if large.size < 2 or rows.size < FEWEST_SAMPLES:
        return None
    gaps = missing[rows].sum(axis=0)
    looked_at = np.flatnonzero((gaps >= FEWEST_GAPS) & (gaps <= rows.size - FEWEST_GAPS))
    if looked_at.size == 0:
        return None
    table = missing[np.ix_(rows, looked_at)].astype(np.float64)
    member = np.asarray(codes[rows][:, None] == large, dtype=np.float64)
    observed = _total(table, member)
    reached = sum(_total(table, rng.permutation(member)) >= observed * (1 - 1e-9) for _ in range(DRAWS))
    shares = np.full((looked_at.size, n_levels), np.nan)
    shares[:, large] = (table.T @ member) / member.sum(axis=0)
    apart = np.nanmax(shares, axis=1) - np.nanmin(shares, axis=1)
    far = np.argsort(-apart, kind="stable")[: np.count_nonzero(apart >= APART)]
    return Follows((1 + reached) / (1 + DRAWS), looked_at[far], shares[far], looked_at.size)


def _total(table: FloatArray, member: FloatArray) -> float:
    """Return the sum of the features' chi-squared figures."""
    share = table.mean(axis=0)
    sizes = member.sum(axis=0)
    squared = (member.T @ table - np.outer(sizes, share)) ** 2
    return float(np.sum(squared / sizes[:, None] / (share * (1 - share))))


def _finding(block: CheckedBlock, column: SheetColumn, follows: Follows) -> Finding:
    features = tuple(block.features[j] for j in follows.features)
    grouped = not column.technical and column.name not in block.adjust
    what = (
        f"gaps of block '{block.name}' follow {'the group' if grouped else 'column'} '{column.name}' "
        f"(p {small(follows.p)} over permuted samples): {counted(len(features), 'feature')} of "
        f"{follows.tested} looked at are missing far more often in one level than in another, such as "
        f"{some(features[:3])}"
    )
    identity = finding_id(CHECK, block.name, column.name)
    if grouped:
        todo = (
            "ask whether the groups were measured apart; values that were filled in there follow the group too: "
            f"read edges of these features with their imputed_share, or keep it with {accept_line(identity)}"
        )
    else:
        todo = (
            "values that were filled in follow it too: read edges of these features with their imputed_share"
        )
        if column.name not in block.adjust:
            todo += f"; adjust for it: {adjust_line(block.name, [*block.settings.adjust, column.name])}"
    shown = follows.shares[:MOST_DRAWN]
    evidence = GapShares(column.name, column.levels, features[:MOST_DRAWN], shown)
    return Finding(identity, CHECK, "warning", block.name, what, (), features, todo, evidence)
