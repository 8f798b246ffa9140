"""Which samples the blocks have, lack and share."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd
from scipy.stats import fisher_exact

from workbench.checks.data import CheckedBlock, StudyData, shared_rows
from workbench.checks.finding import Finding, finding_id
from workbench.checks.words import number_of, some
from workbench.intake import missing_samples
from workbench.intake.faults import counted

CHECK = "alignment"
FEWEST_SHARED = 4
HALF = 0.5
LACKING_LEVEL = 0.01


def check_alignment(data: StudyData) -> list[Finding]:
    """Find samples that no block has or that a block lacks, cells of the design without a value, and what is shared.

    An error: two blocks of different layers share fewer than four samples. A warning: they share fewer than
    half of the smaller block's samples; samples have no value in a column of the design; the samples that a
    block lacks are mostly of one group.
    """
    found = _in_no_block(data) + _design_cells(data)
    for block in data.blocks.values():
        found += _lacking(data, block)
    for one, other in data.pairs:
        found += _shared(one, other)
    return found


def _in_no_block(data: StudyData) -> list[Finding]:
    measured = {sample for block in data.blocks.values() for sample in block.samples}
    left_out = {sample for block in data.blocks.values() for sample in block.settings.exclude}
    nowhere = [name for name in map(str, data.kept_sheet.index) if name not in measured | left_out]
    if not nowhere or not data.blocks:
        return []
    what = f"{number_of(nowhere, 'sample')} of the sample sheet {'is' if len(nowhere) == 1 else 'are'} in no block"
    todo = "nothing, if they were not measured; else look at how the tables write these names"
    return [Finding(finding_id(CHECK, "in_no_block"), CHECK, "note", "", what, tuple(nowhere), (), todo)]


def _lacking(data: StudyData, block: CheckedBlock) -> list[Finding]:
    others = {
        sample for other in data.blocks.values() if other is not block for sample in other.samples
    } - set(block.samples)
    lacking = [name for name in map(str, data.kept_sheet.index) if name in others]
    lacking = [name for name in lacking if name not in block.settings.exclude]
    if not lacking:
        return []
    what = f"block '{block.name}' lacks {number_of(lacking, 'sample')} that another block has"
    todo = "nothing, if they were not measured; else look at how the table writes these names"
    uneven = _uneven(data, lacking)
    severity = "warning" if uneven else "note"
    if uneven:
        what += f"; they are not spread evenly over the groups: {uneven}"
        todo += "; ask why they are missing, as a comparison of groups rests on the samples that are left"
    identity = finding_id(CHECK, block.name, "lacks")
    return [Finding(identity, CHECK, severity, block.name, what, tuple(lacking), (), todo)]  # type: ignore[arg-type]


def _uneven(data: StudyData, lacking: list[str]) -> str:
    """Return in which group most samples lack, when that is more than chance (Fisher, Bonferroni over groups)."""
    every: dict[str, str] = {}
    for one in data.blocks.values():
        for sample, code in zip(one.samples, one.group_codes.tolist(), strict=True):
            if code >= 0:
                every[sample] = one.group_levels[code]
    levels = sorted(set(every.values()))
    told = []
    for level in levels:
        members = [sample for sample in every if every[sample] == level]
        others = [sample for sample in every if every[sample] != level]
        gone, gone_others = len(set(members) & set(lacking)), len(set(others) & set(lacking))
        table = np.array([[gone, len(members) - gone], [gone_others, len(others) - gone_others]])
        if others and fisher_exact(table, alternative="greater")[1] * len(levels) <= LACKING_LEVEL:
            told.append(f"{gone} of {len(members)} of '{level}' and {gone_others} of {len(others)} others")
    return "; ".join(told)


def _design_cells(data: StudyData) -> list[Finding]:
    """Find empty cells of the design: of the study's columns once, of a block's own columns for that block."""
    samples, sheet = data.settings.samples, data.kept_sheet
    own_samples = {name for block in data.blocks.values() for name in block.samples}
    of_study = dict.fromkeys(samples.group, "group") | dict.fromkeys(samples.adjust, "adjust")
    measured = sheet.loc[[name for name in sheet.index if str(name) in own_samples]]
    found = _cells("", measured, {column: part for column, part in of_study.items() if column in measured})
    for block in data.blocks.values():
        own = {
            column: "adjust" for column in block.adjust if column in block.columns and column not in of_study
        }
        found += _cells(block.name, block.columns, own)
    return found


def _cells(block: str, frame: pd.DataFrame, parts: Mapping[str, str]) -> list[Finding]:
    where = f" of block '{block}'" if block else ""
    return [
        Finding(
            finding_id(CHECK, block, "no_value", column),
            CHECK,
            "warning",
            block,
            f"{counted(len(samples), 'sample')}{where} without a value in column '{column}' ({parts[column]}): "
            f"{some(samples)}; every analysis{where} leaves {'it' if len(samples) == 1 else 'them'} out",
            tuple(samples),
            todo="fill the cells of the sheet that holds the column, or exclude the samples with a reason",
        )
        for column, samples in missing_samples(frame, list(parts)).items()
    ]


def _shared(one: CheckedBlock, other: CheckedBlock) -> list[Finding]:
    n = shared_rows(one, other)[0].size
    smaller = min(len(one.samples), len(other.samples))
    if n >= FEWEST_SHARED and n >= HALF * smaller:
        return []
    both = f"blocks '{one.name}' and '{other.name}'"
    what = f"{both} share {counted(n, 'sample')} with a complete design, of {len(one.samples)} and {len(other.samples)}"
    severity = "error" if n < FEWEST_SHARED else "warning"
    todo = _how_to_share(one, other)
    identity = finding_id(CHECK, "", "shared", one.name, other.name)
    return [
        Finding(identity, CHECK, severity, "", what, (), (), todo, acceptable=severity != "error")  # type: ignore[arg-type]
    ]


def _how_to_share(one: CheckedBlock, other: CheckedBlock) -> str:
    """Return what to do about few shared samples: look at names that one side alone has, or measure more."""
    mine = [sample for sample in one.samples if sample not in other.samples]
    theirs = [sample for sample in other.samples if sample not in one.samples]
    if mine and theirs:
        return (
            f"if the two tables name the same samples differently, write one name ('{one.name}' alone has "
            f"{some(mine[:3])}, '{other.name}' alone {some(theirs[:3])}); else measure more samples in both"
        )
    return "measure more samples in both, or fill the cells of the design that are empty"
