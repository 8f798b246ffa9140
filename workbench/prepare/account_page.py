"""The account of a preparation as a file: a page in plain words, and a table."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import pandas as pd

from workbench.prepare.account import figures_of
from workbench.prepare.tables import StepAccount
from workbench.prepare.words import percent


@dataclass(frozen=True)
class PreparedSize:
    """How large a block was before and after: samples, features delivered and left, share of values filled in."""

    samples: int
    delivered: int
    left: int
    imputed_share: float


def account_table(account: Sequence[StepAccount]) -> pd.DataFrame:
    """Return a row per step: what, why, what happened here, numbers, features dropped, cautions, paper, change."""
    rows = [
        {
            "step": place,
            "name": step.step,
            "what": step.rule or step.sentence,
            "why": step.why,
            "here": step.sentence,
            "numbers": figures_of(step),
            "features_dropped": len(step.dropped),
            "caution": "; ".join(step.cautions),
            "paper": step.reference,
            "change": step.change,
        }
        for place, step in enumerate(account, start=1)
    ]
    return pd.DataFrame(rows)


def account_page(account: Sequence[StepAccount], block: str, size: PreparedSize) -> str:
    """Return the account of a block as a page of Markdown.

    Parameters
    ----------
    account : sequence of StepAccount
    block : str
        Its name.
    size : PreparedSize
    """
    lines = [f"# How block {block} was prepared", "", _summary(size), ""]
    cautions = [f"- {step.step}: {caution}." for step in account for caution in step.cautions]
    if cautions:
        lines += ["## Before you trust it", "", *cautions, ""]
    for place, step in enumerate(account, start=1):
        lines += [f"## {place}. {step.step}", "", *_paragraphs(step, block)]
    return "\n".join(lines)


def _summary(size: PreparedSize) -> str:
    gone = size.delivered - size.left
    told = f"{size.samples:,} samples. {size.delivered:,} features were delivered, {size.left:,} columns are left"
    told += f" ({gone:,} fewer). " if gone > 0 else ". "
    if not size.imputed_share:
        return f"{told}Every value was measured; none had to be filled in."
    return (
        f"{told}{percent(size.imputed_share)} of the values were not measured and had to be filled in; layer `imputed` "
        "of the prepared file marks them."
    )


def _paragraphs(step: StepAccount, block: str) -> list[str]:
    what = step.rule or step.sentence
    told = [f"What: {what}."]
    if step.why:
        told.append(f"Why: {step.why}.")
    if step.sentence != step.rule:
        told.append(f"Here: {step.sentence}.")
    if step.numbers:
        told.append(f"In numbers: {figures_of(step)}.")
    if step.dropped:
        told.append(f"Dropped: {_reasons(step)}; every one with its reason in `prepared_features.tsv`.")
    told += [f"Caution: {caution}." for caution in step.cautions]
    if step.reference:
        told.append(f"Paper: {step.reference}.")
    if step.change:
        told.append(f"To change it, in `project.toml` under `[blocks.{block}.prepare]`: {step.change}.")
    return [line for paragraph in told for line in (paragraph, "")]


def _reasons(step: StepAccount) -> str:
    names = list(step.dropped)
    shown = ", ".join(f"{name} ({step.dropped[name]})" for name in names[:3])
    return shown + (f" and {len(names) - 3:,} more" if len(names) > 3 else "")
