"""record.json: everything that is needed to understand and repeat an analysis, and the same in sentences."""

from __future__ import annotations

import platform
from collections.abc import Mapping
from importlib.metadata import version
from typing import Any

import numpy as np
import pandas as pd

from workbench import __version__
from workbench.engine import critical_r
from workbench.engine.evidence.pair_basis import GROUP_BOUND
from workbench.engine.evidence.planning import SHARE, significance_level, smallest_correlation
from workbench.intake.faults import counted
from workbench.workflow.analysis_inputs import analysis_inputs
from workbench.workflow.analysis_view import AnalysisView, Shared
from workbench.workflow.choices import choices_of
from workbench.workflow.network.private import private_lines, private_record
from workbench.workflow.network.screening import Screen, Screens
from workbench.workflow.state import ProjectState
from workbench.workflow.subjects import visit_lines
from workbench.workflow.tables import excluded

FORMAT = 1
FRAGILE_SHARE = 0.5
SMALL_FREEDOM = 30
POWER = 0.8
LIBRARIES = ("numpy", "scipy", "pandas", "scikit-learn", "anndata", "h5py", "networkx")


def analysis_record(
    state: ProjectState, view: AnalysisView, screens: Screens, group_pairs: int, heavy: Mapping[str, int]
) -> dict[str, Any]:
    """Return the record of an analysis: settings, inputs, samples, pairs tested, versions; no date."""
    removes = view.settings.network.remove_private
    return {
        "format": FORMAT,
        "analysis": view.name,
        "study": state.settings.study.model_dump(mode="json"),
        "samples_settings": state.settings.samples.model_dump(mode="json"),
        "parameters": view.settings.model_dump(mode="json"),
        "blocks": {name: _block_record(state, view, name) for name in view.blocks},
        "block_pairs": _pair_records(view, screens),
        "rules": {
            "edge": "q over all cross-layer pairs of the analysis and q_block inside the two blocks, both at or "
            "under fdr (Benjamini-Hochberg)",
            "basis_group": f"95 % interval of the correlation within groups inside +-{GROUP_BOUND} of |r_total|",
            "intervals": "r_low, r_high at the false-coverage rate of the selected edges",
            "canonical_pairs": ", ".join(view.layers),
        },
        "private_variation": private_record(view, screens.chosen, heavy) if removes else "not removed",
        "choices": list(choices_of(state.settings)),
        "edges": int(screens.chosen.found.r.size),
        "support": support_counts(screens.chosen),
        "group_pairs": group_pairs,
        "edges_cut": cut_sentence(screens.chosen.found, view) or None,
        "inputs": analysis_inputs(state, view.name),
        "versions": {
            "workbench": __version__,
            "python": platform.python_version(),
            **{library: version(library) for library in LIBRARIES},
        },
        "cautions": "Research use; association is not causation; not for diagnosis or treatment; confirm by a "
        "targeted assay.",
    }


def screen_sentences(
    view: AnalysisView, screens: Screens, group_pairs: int, heavy: Mapping[str, int]
) -> list[str]:
    """Return what the screens tested and found, in plain words, before the network is described."""
    tested, found = int(sum(screens.chosen.found.tested)), int(screens.chosen.found.r.size)
    how = (
        "within groups"
        if screens.chosen is screens.within
        else "group left in"
        if view.factors
        else "no group"
    )
    fdr = view.settings.network.fdr
    lines = [
        *reach_sentences(view, screens),
        *(private_lines(view, screens.chosen, heavy) if view.settings.network.remove_private else []),
        f"{tested:,} cross-layer pairs tested ({how}), {counted(found, 'edge')} at a false-discovery rate of "
        f"{fdr:g}",
        *support_lines(screens.chosen),
    ]
    untestable = int(sum(screens.chosen.found.untestable))
    if untestable:
        lines.append(
            f"{counted(untestable, 'pair')} could not be tested: nothing of a feature is left on the shared "
            "samples once nuisance and group are removed"
        )
    lines += _visit_lines(view)
    if view.within_groups:
        passing = counted(group_pairs, "pair passes", "pairs pass")
        lines.append(f"{passing} only with the group left in: group_pairs.tsv, not edges")
    cut = cut_sentence(screens.chosen.found, view)
    if cut:
        lines.append(cut)
    return lines


def support_counts(screen: Screen) -> dict[str, int]:
    """Return how many edges each kind of support carries."""
    kinds, counts = np.unique(screen.support, return_counts=True)
    return {str(kind): int(count) for kind, count in zip(kinds, counts, strict=True)}


def support_lines(screen: Screen) -> list[str]:
    """Return how many edges their module alone carries, and why some couples of components carry none."""
    alone = int((screen.support == "module").sum())
    lines = []
    if alone:
        carried = counted(alone, "edge is", "edges are")
        lines.append(f"{carried} carried by their module alone (column support; guide edges)")
    if screen.mixed:
        lines.append(
            f"{screen.mixed} of {counted(screen.couples, 'couple')} of shared components mix several factors: no "
            "edge is carried by them"
        )
    return lines


def reach_sentences(view: AnalysisView, screens: Screens) -> list[str]:
    """Return what this design could find at all: the |r| that a single true pair needs to become an edge."""
    lines = []
    counts = screens.chosen.found.tested
    for k, ((first, second), one) in enumerate(zip(view.pairs, screens.shared, strict=True)):
        if counts[k]:
            level = view.settings.network.fdr / sum(counts)
            least = float(critical_r(level, screens.chosen.freedom[k]))
            lines.append(
                f"{first} x {second}: on {counted_rows(one, view)} a pair that is alone becomes an edge at |r| of "
                f"{least:.2f} or more; the more pairs there are, the lower"
            )
            lines += _small_design(view, screens.chosen.freedom[k])
    return lines


def _small_design(view: AnalysisView, freedom: int) -> list[str]:
    """Return what a small design is likely to find at all; nothing for a larger one."""
    if freedom >= SMALL_FREEDOM:
        return []
    alpha = significance_level(view.settings.network.fdr, SHARE, POWER)
    smallest = smallest_correlation(freedom + 2, alpha, POWER) if freedom >= 2 else 1.0
    return [
        f"few samples: if one pair in {1 / SHARE:,.0f} is true, only true correlations of {smallest:.2f} or more are "
        f"likely to be found (chance {100 * POWER:.0f} %); `workbench plan` says how many samples weaker ones need"
    ]


def _visit_lines(view: AnalysisView) -> list[str]:
    """Return the order in which the visits were taken, where a column of text gives it."""
    samples = view.study.samples
    if samples.time is None or view.settings.level is None:
        return []
    return visit_lines(view.sheet[samples.time], samples.order.get(samples.time))


def counted_rows(shared: Shared, view: AnalysisView) -> str:
    """Return what the test of a pair counts, in words: samples, subjects, or changes within subjects."""
    design = shared.subjects
    if design is None or design.kind == "single":
        return f"{shared.n} samples"
    if view.settings.level == "subjects":
        return f"the means of {design.n_subjects} subjects ({shared.n} samples)"
    used = int(design.repeated.sum())
    subjects = len(set(design.subject[design.repeated].tolist()))
    return f"{counted(used - subjects, 'change')} within {counted(subjects, 'subject')}"


def fragile_sentence(edges: pd.DataFrame, correlation: str) -> str:
    """Return how many edges lose half of their correlation when one sample is left out, empty for none."""
    fragile = int((edges["r_without_one"].abs() < edges["r"].abs() * FRAGILE_SHARE).sum())
    if not fragile:
        return ""
    else_ranks = "" if correlation == "spearman" else ', or set network.correlation = "spearman"'
    return (
        f"{fragile:,} of {len(edges):,} edges lose half of r or more when a single sample is left out "
        f"(r_without_one): look for an odd sample{else_ranks}"
    )


def cut_sentence(screen: Any, view: AnalysisView) -> str:
    """Return the sentence that says how many edges the ``maximum_edges`` cut took, empty when it took none."""
    if screen.passed <= screen.r.size:
        return ""
    return (
        f"{screen.passed:,} pairs passed; the {screen.r.size:,} strongest are kept "
        f"(network.maximum_edges = {view.settings.network.maximum_edges})"
    )


def _block_record(state: ProjectState, view: AnalysisView, name: str) -> dict[str, Any]:
    block = view.blocks[name]
    held = set(block.samples)
    lacking = [str(sample) for sample in state.require_sheet().index if sample not in held]
    reasons = excluded(state, name)
    return {
        "settings": block.settings.model_dump(mode="json"),
        "source_sha256": state.manifest.files.get(block.settings.file, ""),
        "samples": list(block.samples),
        "left_out": {sample: reasons.get(sample, "not in this block's table") for sample in lacking},
        "features_measured": len(block.measured.features),
        "features_prepared": len(block.features),
        "imputed_share": float(block.imputed.mean()),
    }


def _pair_records(view: AnalysisView, screens: Screens) -> list[dict[str, Any]]:
    return [
        {
            "source_block": first,
            "target_block": second,
            "samples": list(one.samples),
            "left_out": view.lacking_design((first, second)),
            "nuisance": list(one.nuisance_names),
            "groups": list(one.groups.levels) if one.groups is not None else [],
            "tested": int(screens.chosen.found.tested[k]),
            "untestable": int(screens.chosen.found.untestable[k]),
            "edges": int((screens.chosen.found.pair_index == k).sum()),
        }
        for k, ((first, second), one) in enumerate(zip(view.pairs, screens.shared, strict=True))
    ]
