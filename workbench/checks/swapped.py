"""Swapped samples: two tubes exchanged in one layer's assay, cycles of three, and rows that match nobody."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workbench.checks.data import CheckedBlock, StudyData
from workbench.checks.finding import Finding, accept_line, exclude_line, finding_id, toml_text
from workbench.checks.words import small
from workbench.engine.swaps.layer_match import LayerMatch
from workbench.engine.swaps.strangers import Stranger
from workbench.engine.swaps.swap_cycles import Swap
from workbench.engine.swaps.swap_evidence import SwapEvidence
from workbench.engine.swaps.swap_layers import SwapLayer
from workbench.engine.swaps.swapped_samples import SwapSearch, find_swapped_samples
from workbench.errors import NumericsError
from workbench.intake.faults import listed

FloatArray = NDArray[np.float64]

CHECK = "swapped_samples"
NOBODY = "unmatched_sample"
REASON = "how the laboratory settled it"


@dataclass(frozen=True, eq=False)
class SwapPicture:
    """Every sample's score beside the one expected of it, and the exchanged samples before and after.

    Attributes
    ----------
    samples : tuple of str
    expected, score : ndarray of shape (n_samples,)
        As delivered, in standard deviations of their difference.
    swapped : tuple of int
        Positions of the exchanged samples.
    expected_after, score_after : ndarray
        Where those come to when exchanged, in the order of ``swapped``.
    labels : pair of str
        What is expected, and what is scored.
    """

    samples: tuple[str, ...]
    expected: FloatArray
    score: FloatArray
    swapped: tuple[int, ...]
    expected_after: FloatArray
    score_after: FloatArray
    labels: tuple[str, str]


def swapped_samples(data: StudyData) -> list[Finding]:
    """Find samples that were exchanged in one block, by what the blocks tell of each other.

    All blocks that are prepared take part, those of one layer too. An exchange is an error; a sample that
    matches nobody is a warning; a pair of blocks that share nothing is told in a note: "not testable".
    Exchanges across groups or run days can be seen in a block alone, by its design.
    """
    blocks = [block for block in data.blocks.values() if block.prepared is not None and block.usable.size]
    if len(blocks) < 2:
        return []
    names = list(dict.fromkeys(sample for block in blocks for sample in block.take(block.usable)))
    layers = [_layer(block, {name: place for place, name in enumerate(names)}) for block in blocks]
    try:
        search = find_swapped_samples(layers, random_state=data.seed)
    except NumericsError as error:
        return [_untestable_study(str(error))]
    found = [_swap_finding(swap, names, search) for swap in search.swaps]
    found += [_stranger_finding(one, names) for one in search.strangers]
    return found + _untestable(search)


def _layer(block: CheckedBlock, place: dict[str, int]) -> SwapLayer:
    """Return a block for the search: its nuisance columns may stay with the run, the group goes with the tube."""
    assert block.prepared is not None
    rows = block.usable
    return SwapLayer(
        block.name,
        block.prepared[rows],
        np.array([place[sample] for sample in block.take(rows)]),
        block.nuisance[rows],
        block.group_columns[rows],
    )


def _swap_finding(swap: Swap, names: Sequence[str], search: SwapSearch) -> Finding:
    samples = tuple(names[sample] for sample in swap.samples)
    block = swap.layers[0] if len(swap.layers) == 1 else ""
    where = "the sample sheet" if swap.everywhere else " or ".join(f"block '{name}'" for name in swap.layers)
    told = "" if len(swap.layers) == 1 or swap.everywhere else "; the data cannot tell in which"
    shared = sum(one.shared_gain for one in swap.evidence)
    design = sum(one.design_gain for one in swap.evidence)
    runs = (
        "; the marks of the runs stayed, so that the tubes were exchanged before them"
        if swap.before_runs
        else ""
    )
    what = (
        f"{_exchange(samples)} in {where}{told}: evidence {swap.gain:.1f} (natural log of a likelihood ratio), where "
        f"{100 * search.level:.0f} % of clean studies like this one reach {swap.bound:.1f}; as delivered, {shared:.1f} "
        f"from the agreement of the blocks and {design:.1f} from the block's own groups and batches{runs}"
    )
    identity = finding_id(CHECK, block or ("sheet" if swap.everywhere else ""), *samples)
    evidence = _picture(swap.evidence[0], names)
    return Finding(
        identity, CHECK, "error", block, what, samples, (), _todo(swap, samples, identity), evidence
    )


def _exchange(samples: tuple[str, ...]) -> str:
    if len(samples) == 2:
        return f"{listed(samples)} look exchanged"
    order = " -> ".join(f"'{sample}'" for sample in (*samples, samples[0]))
    return (
        f"{listed(samples, len(samples))} look exchanged in a cycle (each row belongs to the next: {order})"
    )


def _todo(swap: Swap, samples: tuple[str, ...], identity: str) -> str:
    ask = "ask the laboratory for its lists of tubes and runs"
    if swap.everywhere:
        return f"{ask}; mend the entries of these samples in samples.tsv, or {accept_line(identity)}"
    undo = [f"[blocks.{name}] {_swap_line(name, swap, samples)}" for name in swap.layers]
    both = exclude_line("", samples, REASON)
    accept = accept_line(identity)
    return f"{ask}; then undo it with {' or '.join(undo)}, leave the samples out with {both}, or {accept}"


def _swap_line(block: str, swap: Swap, samples: tuple[str, ...]) -> str:
    """Return the entry that undoes a swap; a cycle runs the other way round in the other block."""
    order = samples if block == swap.layers[0] else (samples[0], *samples[:0:-1])
    inside = ", ".join(toml_text(sample) for sample in order)
    return f"swap = [{{ samples = [{inside}], reason = {toml_text(REASON)} }}]"


def _stranger_finding(one: Stranger, names: Sequence[str]) -> Finding:
    sample = names[one.sample]
    block = one.layers[0] if len(one.layers) == 1 else ""
    where = " or ".join(f"block '{name}'" for name in one.layers)
    what = (
        f"'{sample}' matches nobody: its row in {where} does not belong to it by what the blocks tell of each other "
        f"(chance of so large a mismatch in a whole study {small(one.p)}), and no other sample's row would fit"
    )
    identity = finding_id(NOBODY, block, sample)
    todo = (
        f"look for a tube of another study, a mixture or a failed assay; {exclude_line(block, [sample], REASON)}, "
        f"or {accept_line(identity)}"
    )
    return Finding(identity, NOBODY, "warning", block, what, (sample,), (), todo)


def _untestable(search: SwapSearch) -> list[Finding]:
    """Say where swaps could not be seen; once for the study where no two blocks share anything."""
    silent = [match for match in search.matches if match.untestable]
    if len(silent) == len(search.matches):
        return [_untestable_study("; ".join(dict.fromkeys(match.untestable for match in silent)))]
    return [_untestable_pair(match) for match in silent]


def _untestable_study(reason: str) -> Finding:
    what = (
        f"swapped samples: not testable between the blocks ({reason}); that none was found means nothing, but for "
        "exchanges across groups or batches that a block shows by itself"
    )
    return Finding(finding_id(CHECK, "not-testable"), CHECK, "note", "", what, todo=_WHEN_UNTESTABLE)


def _untestable_pair(match: LayerMatch) -> Finding:
    what = (
        f"swapped samples: not testable between block '{match.first}' and block '{match.second}' "
        f"({match.untestable})"
    )
    identity = finding_id(CHECK, "not-testable", match.first, match.second)
    return Finding(identity, CHECK, "note", "", what, todo=_WHEN_UNTESTABLE)


_WHEN_UNTESTABLE = (
    "check the lists of tubes and runs by hand, or genotype a few samples, where a swap would matter"
)


def _picture(evidence: SwapEvidence, names: Sequence[str]) -> SwapPicture:
    expected = (
        f"predicted from {evidence.expected_from}"
        if evidence.expected_from
        else "expected by group and batch"
    )
    return SwapPicture(
        tuple(names[sample] for sample in evidence.samples),
        evidence.expected,
        evidence.score,
        tuple(int(place) for place in evidence.places),
        evidence.expected_after,
        evidence.score_after,
        (f"{expected} (sd)", f"score of {evidence.layer} (sd)"),
    )
