"""Rows that were exchanged in the laboratory and have been put right in the settings."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from workbench.errors import InputError

from .faults import listed, shown

if TYPE_CHECKING:
    from workbench.settings.schema import Swap


def owners(swaps: Sequence[Swap], sample_ids: Sequence[str]) -> dict[str, str]:
    """Return, for each swapped name, the sample that its row belongs to.

    Each name's row belongs to the next one of its chain, the last's to the first.

    Raises
    ------
    InputError
        When a sample is not of the sheet, or is swapped twice.
    """
    named = [name for swap in swaps for name in swap.samples]
    unknown = [name for name in named if name not in set(sample_ids)]
    if unknown:
        raise InputError(
            f"project.toml: swap names samples that the sheet does not have: {listed(unknown)}; mend the names"
        )
    twice = sorted({name for name in named if named.count(name) > 1})
    if twice:
        raise InputError(
            f"project.toml: swap names {listed(twice)} more than once; join the chains, each sample once"
        )
    return {
        name: follower
        for swap in swaps
        for name, follower in zip(swap.samples, (*swap.samples[1:], swap.samples[0]), strict=True)
    }


def swap_lines(swaps: Sequence[Swap]) -> list[str]:
    """Return a sentence for each chain: whose row belongs to whom, and why that is known."""
    chains = [(" -> ".join(map(shown, (*swap.samples, swap.samples[0]))), swap.reason) for swap in swaps]
    return [f"swap undone: each row of {chain} belongs to the next ({reason})" for chain, reason in chains]
