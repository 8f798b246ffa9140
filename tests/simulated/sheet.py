"""The sample sheet: who was sampled, in which group, and on which day the assays ran."""

from __future__ import annotations

import numpy as np
import pandas as pd

from .design import Block, Design


def stream(seed: int, *place: int) -> np.random.Generator:
    """Return the generator of one part of a study, so that changing one part leaves the draws of all others."""
    return np.random.default_rng(np.random.SeedSequence(seed, spawn_key=place))


def deal(n: int, kinds: int, rng: np.random.Generator) -> np.ndarray:
    """Return `n` codes in random order, each of `kinds` as often as the others, give or take one."""
    return (rng.permutation(n) + rng.integers(kinds)) % kinds


def deal_days(groups: np.ndarray, days: int, tangle: float, rng: np.random.Generator) -> np.ndarray:
    """Return run days balanced within each group, but for a share `tangle` that is kept to the group's own days.

    Days are shared out to the groups in turn, so that with `tangle` = 1 the day tells the group.
    """
    n_groups = int(groups.max()) + 1
    dealt = np.zeros(len(groups), dtype=int)
    for group in range(n_groups):
        members = np.flatnonzero(groups == group)
        own = np.arange(group % days, days, n_groups)
        tangled = rng.random(len(members)) < tangle
        dealt[members] = np.where(
            tangled, own[deal(len(members), len(own), rng)], deal(len(members), days, rng)
        )
    return dealt


def sample_sheet(design: Design, seed: int) -> pd.DataFrame:
    """Return the sample sheet, indexed by sample, with a column for each part of the design that is in use."""
    rng = stream(seed, 0)
    subjects = design.n // design.visits
    subject, visit = np.divmod(np.arange(design.n), design.visits)
    sheet = pd.DataFrame(index=pd.Index([f"S{i:03d}" for i in range(1, design.n + 1)], name="sample"))
    n_groups = max(1, len(design.groups))
    group = deal(subjects, n_groups, rng)[subject] if design.group_by == "subject" else visit % n_groups
    if design.groups:
        sheet["group"] = np.array(design.groups)[group]
    if design.visits > 1:
        sheet["subject"] = [f"P{i:03d}" for i in subject + 1]
        sheet["visit"] = visit + 1
    if design.run_days > 1:
        sheet["run_day"] = _day_names(deal_days(group, design.run_days, design.tangle, rng))
    for place, block in enumerate(design.blocks, start=1):
        _add_assay_columns(sheet, block, group, design.tangle, stream(seed, place, 0))
    return sheet


def _add_assay_columns(
    sheet: pd.DataFrame, block: Block, group: np.ndarray, tangle: float, rng: np.random.Generator
) -> None:
    """Add the run days and the run order that one assay has for itself."""
    if block.days > 1:
        sheet[f"{block.name}_day"] = _day_names(deal_days(group, block.days, tangle, rng))
    if block.drift:
        sheet[f"{block.name}_order"] = rng.permutation(len(sheet)) + 1


def _day_names(days: np.ndarray) -> list[str]:
    return [f"day{day + 1}" for day in days]


def day_column(sheet: pd.DataFrame, name: str) -> str | None:
    """Return the column that holds the run days of a block, None when all was run on one day."""
    return next((column for column in (f"{name}_day", "run_day") if column in sheet), None)


def indicators(column: pd.Series) -> np.ndarray:
    """Return one 0/1 column for each level, shape (n, levels)."""
    return pd.get_dummies(column).to_numpy(dtype=float)


def design_matrix(sheet: pd.DataFrame, *names: str) -> np.ndarray:
    """Return an orthonormal basis of the design: intercept, group, visit, and the named blocks' days and order.

    Columns that follow from the others, as the group does from tangled run days, are left out by a rank
    rule (singular values under 1e-8 of the largest).
    """
    classes = {"group", "visit"} | {day_column(sheet, name) for name in names}
    numbers = {f"{name}_order" for name in names}
    parts = [np.ones((len(sheet), 1))] + [indicators(sheet[name]) for name in sheet if name in classes]
    parts += [sheet[[name]].to_numpy() / len(sheet) for name in sheet if name in numbers]
    left, size, _ = np.linalg.svd(np.hstack(parts), full_matrices=False)
    return left[:, size > 1e-8 * size[0]]
