"""What a recipe would do, and what it did, in words: rule, why, numbers, paper, how to change it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from workbench.prepare.steps import Step
from workbench.prepare.tables import StepAccount
from workbench.prepare.words import some
from workbench.settings.prepare_keys import prepare_keys, toml_text
from workbench.settings.prepare_schema import PrepareSettings

LISTED_REASONS = 3


@dataclass(frozen=True)
class Explanation:
    """What a step would do.

    Attributes
    ----------
    step, rule, why : str
        Its name, what it does, and why.
    reference : str
        The paper; empty when there is none.
    change : str
        The lines of ``[blocks.NAME.prepare]`` that change it, as they stand now; empty when none does.
    """

    step: str
    rule: str
    why: str
    reference: str
    change: str


def explain_step(step: Step, layer: str, values: str, settings: PrepareSettings) -> Explanation:
    """Return what a step would do under these settings."""
    return Explanation(
        step.step, step.rule, step.why, step.paper, _change(step.keys, layer, values, settings)
    )


def explained(account: StepAccount, explanation: Explanation) -> StepAccount:
    """Return a step's account with its rule, its reason, its paper and how to change it."""
    return replace(
        account,
        rule=explanation.rule,
        why=explanation.why,
        reference=account.reference or explanation.reference,
        change=explanation.change,
    )


def _change(keys: tuple[str, ...], layer: str, values: str, settings: PrepareSettings) -> str:
    allowed = {key.key: key.allowed for key in prepare_keys(layer, values)}
    return "; ".join(f"{key} = {toml_text(getattr(settings, key))} (allowed: {allowed[key]})" for key in keys)


def explain_lines(account: Sequence[StepAccount], block: str) -> tuple[str, ...]:
    r"""Return an account as plain lines for a terminal.

    Parameters
    ----------
    account : sequence of StepAccount
        Of one block, in order.
    block : str
        Its name, for the lines of ``project.toml``.

    Examples
    --------
    >>> account = StepAccount("logarithm", "log2", rule="log2", why="effects multiply", change='zeros = "missing"')
    >>> print("\n".join(explain_lines([account], "lipids")))
    1. logarithm
       what     log2
       why      effects multiply
       change   in project.toml under [blocks.lipids.prepare]: zeros = "missing"
    """
    lines: list[str] = []
    for place, step in enumerate(account, start=1):
        lines.append(f"{place}. {step.step}")
        lines += [f"   {label:<8} {text}" for label, text in _labelled(step, block)]
    return tuple(lines)


def _labelled(step: StepAccount, block: str) -> list[tuple[str, str]]:
    told = [("what", step.rule or step.sentence)]
    if step.why:
        told.append(("why", step.why))
    if step.sentence != step.rule:
        told.append(("here", step.sentence))
    if step.numbers:
        told.append(("numbers", figures_of(step)))
    if step.dropped:
        told.append(("dropped", _dropped(step.dropped)))
    told += [("caution", caution) for caution in step.cautions]
    if step.reference:
        told.append(("paper", step.reference))
    if step.change:
        told.append(("change", f"in project.toml under [blocks.{block}.prepare]: {step.change}"))
    return told


def figures_of(step: StepAccount) -> str:
    """Return the numbers of a step in words."""
    held = {f"{name}_in" for name in step.numbers}
    told = []
    for name, value in step.numbers.items():
        where = step.numbers.get(f"{name}_in")
        if name not in held:
            told.append(
                f"{name.replace('_', ' ')} {_figure(value)}" + (f" in {where}" if where is not None else "")
            )
    return "; ".join(told)


def _figure(value: float | int | str) -> str:
    """Return a figure in four digits, a whole number in full, a name as it is."""
    if isinstance(value, float):
        return f"{value:.4g}"
    return f"{value:,}" if isinstance(value, int) else value


def _dropped(reasons: dict[str, str]) -> str:
    shown = "; ".join(f"{some([name])} ({why})" for name, why in list(reasons.items())[:LISTED_REASONS])
    more = len(reasons) - LISTED_REASONS
    return f"{shown}; and {more:,} more" if more > 0 else shown
