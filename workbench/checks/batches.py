"""Variation that follows a column of the sample sheet which the settings do not name: a batch, a run order."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import beta, f, norm, rankdata

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.evidence import ScoresByColumn
from workbench.checks.finding import Finding, accept_line, adjust_line, finding_id
from workbench.checks.sheet_columns import SheetColumn, unused_columns
from workbench.checks.space import DesignFree, design_free
from workbench.checks.words import percent, small
from workbench.engine.nuisance import Nuisance

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]

CHECK = "unnamed_batch"
LEVEL = 0.01
LEAST_SHARE = 0.01
LEAST_ROOM = 0.05
LEAST_FREEDOM = 4
MOST_REPORTED = 5


@dataclass(frozen=True, eq=False)
class Carried:
    """How much of a block a column carries, once the design is taken out.

    Attributes
    ----------
    p : float
        The smaller of the components' p (times their number) and of that of all components together, doubled.
    share : float
        Share of the block's variance that the column explains, less what chance explains.
    component : int
        The component (from 0) that goes with it most, and
    r2 : float
        the share of its scores that the column explains.
    """

    p: float
    share: float
    component: int
    r2: float


def unnamed_batches(data: StudyData) -> list[Finding]:
    """Find columns of the sample sheet that go with the components of a block and are not adjusted for.

    The block's nuisance and group are taken out of the components with signal (as normal scores, so that no
    single sample decides) and out of the column. A column is reported when its p, over all columns and blocks,
    stays under 0.01 and it explains at least 1 % of the block's variance more than chance; then it is taken out
    as well and the others are asked again, so that of columns that say the same only the strongest is named.
    A column with the name of a batch, day or order is a warning; any other is a note.
    """
    asked = [(block, tuple(unused_columns(data, block))) for block in data.blocks.values()]
    tests = sum(len(columns) for _, columns in asked)
    return [finding for block, columns in asked for finding in _of_block(block, columns, tests)]


def _of_block(block: CheckedBlock, columns: Sequence[SheetColumn], tests: int) -> list[Finding]:
    if block.prepared is None or not columns:
        return []
    x, design = block.prepared[block.usable], block.design()
    left, found = list(columns), list[Finding]()
    space = design_free(x, design)
    while left and space is not None and len(found) < MOST_REPORTED:
        carried = [carries(space, column, block.usable, design) for column in left]
        passing = [
            (one.p, k) for k, one in enumerate(carried) if one and one.p * tests <= LEVEL and one.share >= LEAST_SHARE
        ]  # fmt: skip
        if not passing:
            break
        best = min(passing)[1]
        strongest, one = left.pop(best), carried[best]
        assert one is not None
        found.append(_finding(block, space, strongest, one, [*block.settings.adjust, strongest.name]))
        held = strongest.held[block.usable]
        if not held.all():
            break
        design = np.hstack([design, strongest.indicators(_at(block.usable, strongest.held))])
        space = design_free(x, design)
    return found


def _at(rows: NDArray[np.intp], held: BoolArray) -> BoolArray:
    """Return a mask over all samples: those of ``rows`` that are held."""
    mask = np.zeros(held.size, dtype=bool)
    mask[rows] = held[rows]
    return mask


def carries(
    space: DesignFree, column: SheetColumn, usable: NDArray[np.intp], design: FloatArray
) -> Carried | None:
    """Return how much of a block goes with a column; None where the design leaves nothing of the column.

    Parameters
    ----------
    space : DesignFree
        The block without its design, rows as in ``usable``.
    column : SheetColumn
        Of all samples of the block.
    usable : ndarray of int
    design : ndarray of shape (n_usable, n_columns)
    """
    held = column.held[usable]
    k = space.number
    nuisance = Nuisance.of(design[held], int(held.sum())) if held.sum() > 2 else None
    if k == 0 or nuisance is None:
        return None
    asked = _own_directions(column.indicators(_at(usable, column.held)), nuisance)
    freedom = int(held.sum()) - nuisance.rank - asked.shape[1]
    if asked.shape[1] == 0 or freedom < LEAST_FREEDOM:
        return None
    scores = _normal_scores(space.scores[held], nuisance)
    r2 = np.minimum(np.sum((asked.T @ scores) ** 2, axis=0), 1.0)
    single = beta.sf(r2, asked.shape[1] / 2, freedom / 2)
    p = min(1.0, float(single.min()) * k)
    if 1 < k < freedom:
        p = min(1.0, 2.0 * min(p, _all_together(asked, scores, freedom)))
    rest = nuisance.residuals(space.values[held])
    share = float(np.sum((asked.T @ rest) ** 2) / np.sum(rest**2))
    by_chance = asked.shape[1] / (freedom + asked.shape[1])
    best = int(single.argmin())
    return Carried(p, (share - by_chance) / (1.0 - by_chance), best, float(r2[best]))


def _own_directions(columns: FloatArray, nuisance: Nuisance) -> FloatArray:
    """Return orthonormal directions of the columns outside the nuisance; those nearly inside it are left out."""
    centred = columns - columns.mean(axis=0)
    rest = nuisance.residuals(columns)
    left, size, _ = np.linalg.svd(rest, full_matrices=False)
    total = np.linalg.norm(centred, 2)
    return left[:, size**2 > LEAST_ROOM * total**2] if total > 0.0 else left[:, :0]


def _normal_scores(scores: FloatArray, nuisance: Nuisance) -> FloatArray:
    """Return the scores by their ranks on a normal scale, without the nuisance, at unit length."""
    n = scores.shape[0]
    normal = norm.ppf((rankdata(scores, axis=0) - 0.375) / (n + 0.25))
    rest = nuisance.residuals(normal)
    length = np.linalg.norm(rest, axis=0)
    return rest / np.where(length > 0.0, length, 1.0)


def _all_together(asked: FloatArray, scores: FloatArray, freedom: int) -> float:
    """Return the p of Pillai's trace of the column's directions with all components (Pillai 1955, by its F)."""
    components = np.linalg.qr(scores)[0]
    d, k = asked.shape[1], components.shape[1]
    trace = float(np.sum((asked.T @ components) ** 2))
    s, m, half = min(d, k), (abs(k - d) - 1) / 2, (freedom - k - 1) / 2
    upper, lower = s * (2 * m + s + 1), s * (2 * half + s + 1)
    if trace >= s:
        return 0.0
    return float(f.sf(lower / upper * trace / (s - trace), upper, lower))


def _finding(
    block: CheckedBlock, space: DesignFree, column: SheetColumn, carried: Carried, adjust: list[str]
) -> Finding:
    identity = finding_id(CHECK, block.name, column.name)
    where = f"component {carried.component + 1} of what the design leaves"
    what = (
        f"block '{block.name}' goes with column '{column.name}' of the sample sheet, which the settings do not "
        f"adjust for: it explains {percent(carried.r2)} of {where} and {percent(max(carried.share, 0.0))} of the "
        f"block's variance (p {small(carried.p)})"
    )
    todo = f"if it is no part of the question, adjust for it with {adjust_line(block.name, adjust)}"
    if column.technical:
        todo += f"; or keep it with {accept_line(identity)}"
    places = column.places[block.usable]
    evidence = ScoresByColumn(column.name, space.scores[:, carried.component], places, column.levels, where)
    severity = "warning" if column.technical else "note"
    return Finding(identity, CHECK, severity, block.name, what, (), (), todo, evidence)  # type: ignore[arg-type]
