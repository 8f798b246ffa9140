"""The evidence for a feature or a pair: its numbers with a plain reading, and what would weaken it."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from workbench.errors import InputError
from workbench.figures import Drawing, figure_bytes
from workbench.figures.drawing import FORMATS
from workbench.figures.pair import PairPoints, draw_pair
from workbench.store import check_file, read_table
from workbench.store.files import make_folders, write_whole
from workbench.workflow.analysis_view import AnalysisView
from workbench.workflow.loaded_block import load_block
from workbench.workflow.network.adjusted import PairValues, correlation, pair_values
from workbench.workflow.network.doubts import doubts_of
from workbench.workflow.network.naming import find_feature
from workbench.workflow.network.private import read_private
from workbench.workflow.network.record import counted_rows
from workbench.workflow.state import ProjectState

ENDS = ["source_block", "source", "target_block", "target"]
FEWEST_IN_GROUP = 4
SHOWN = "shown"


@dataclass(frozen=True, eq=False)
class Story:
    """What is known of a feature or a pair.

    ``numbers`` are the figures by name, ``lines`` their reading in plain words, ``doubts`` what would weaken it,
    ``partners`` the edges of a feature, ``drawing`` the scatter of a pair (None for a feature).
    """

    title: str
    numbers: dict[str, Any]
    lines: tuple[str, ...]
    doubts: tuple[str, ...]
    partners: pd.DataFrame | None = None
    drawing: Drawing | None = field(default=None, repr=False)


@dataclass(frozen=True, eq=False)
class Tables:
    """The tables of an analysis that a story is told from."""

    edges: pd.DataFrame
    features: pd.DataFrame
    group_pairs: pd.DataFrame


def show(state: ProjectState, analysis: str, names: Sequence[str]) -> list[Story]:
    """Return one story for a single name, or one for each cross-layer pair among several.

    Raises
    ------
    InputError
        When the analysis has no network yet, a name is unknown, or two names are of one layer.
    """
    state.require_analysis(analysis)
    tables = Tables(*(_table(state, analysis, file) for file in ("edges", "features", "group_pairs")))
    rows = [find_feature(tables.features, name) for name in names]
    if len(rows) == 1:
        return [_feature_story(state, analysis, tables, rows[0])]
    order = list(state.settings.blocks)
    rows.sort(key=lambda row: order.index(row["block"]))
    pairs = [(a, b) for k, a in enumerate(rows) for b in rows[k + 1 :] if a["layer"] != b["layer"]]
    if not pairs:
        raise InputError(
            f"{' and '.join(str(row['feature']) for row in rows)} are of one layer ({rows[0]['layer']}); pairs are "
            "tested across layers: name a feature of another layer, or one feature for its partners"
        )
    return [_pair_story(state, analysis, tables, a, b) for a, b in pairs]


def _table(state: ProjectState, analysis: str, name: str) -> pd.DataFrame:
    relative = f"results/{analysis}/{name}.tsv"
    if not (state.root / relative).exists():
        raise InputError(f"{state.root / relative}: not there (yet); run `workbench run {analysis}` first")
    table: pd.DataFrame = read_table(check_file(state.root, relative))
    return table


def _feature_story(state: ProjectState, analysis: str, tables: Tables, row: pd.Series) -> Story:
    fdr = state.settings.analyses[analysis].network.fdr
    partners = _partners(tables.edges, row, fdr)
    beside = _of(tables.group_pairs, row)
    lines = [_feature_line(row)]
    if len(partners):
        strongest = partners.iloc[0]
        lines.append(
            f"{len(partners)} edge{'s' * (len(partners) != 1)}; the strongest is with {strongest['partner']} "
            f"({strongest['block']}), r = {strongest['r']:.2f}"
        )
    else:
        lines.append(
            "no edge: no pair of it passed the evidence rules (this is no evidence that it is alone)"
        )
    if len(beside):
        more = "1 more pair passes" if len(beside) == 1 else f"{len(beside)} more pairs pass"
        lines.append(f"{more} only with the group left in (group_pairs.tsv)")
    doubtful = int((partners["doubts"] != "").sum()) if len(partners) else 0
    doubts = (
        [f"{doubtful} of {len(partners)} edges have something that speaks against them"] if doubtful else []
    )
    numbers = {str(key): _plain(value) for key, value in row.items()}
    return Story(_title(row), numbers, tuple(lines), tuple(doubts), partners)


def _feature_line(row: pd.Series) -> str:
    parts = [
        f"mean {row['mean']:.3g} (prepared units)",
        f"{100 * row['missing_share']:.0f} % missing as delivered",
    ]
    if row["imputed_share"] > 0.0:
        parts.append(f"{100 * row['imputed_share']:.0f} % filled in")
    if "group_p" in row and not pd.isna(row["group_p"]):
        parts.append(
            f"group effect {row['group_effect']:+.2f}, p = {row['group_p']:.2g}, q = {row['group_q']:.2g}"
        )
    return ", ".join(parts)


def _records(table: pd.DataFrame) -> list[dict[str, Any]]:
    return [{str(key): value for key, value in row.items()} for row in table.to_dict("records")]


def _of(table: pd.DataFrame, row: pd.Series) -> pd.DataFrame:
    hit = [
        (table[f"{end}_block"] == row["block"]) & (table[end].astype(str) == str(row["feature"]))
        for end in ("source", "target")
    ]
    found: pd.DataFrame = table[hit[0] | hit[1]]
    return found


def _partners(edges: pd.DataFrame, row: pd.Series, fdr: float) -> pd.DataFrame:
    rows: list[dict[str, Any]] = []
    for edge in _records(_of(edges, row)):
        here = edge["source_block"] == row["block"] and str(edge["source"]) == str(row["feature"])
        end = "target" if here else "source"
        figures: dict[str, Any] = {
            key: edge[key]
            for key in ("r", "r_low", "r_high", "p", "q", "n", "stability", "basis")
            if key in edge
        }
        doubts = "; ".join(doubts_of(edge, fdr))
        rows.append({"partner": str(edge[end]), "block": edge[f"{end}_block"], **figures, "doubts": doubts})
    return pd.DataFrame(rows)


def _pair_story(state: ProjectState, analysis: str, tables: Tables, a: pd.Series, b: pd.Series) -> Story:
    settings = state.settings.analyses[analysis]
    ends = ((str(a["block"]), str(a["feature"])), (str(b["block"]), str(b["feature"])))
    blocks = {block: load_block(state, block) for block, _ in ends}
    view = AnalysisView(analysis, settings, state.settings, state.require_sheet(), blocks)
    within = view.within_groups
    (first, _), (second, _) = ends
    private = {
        block: read_private(state, analysis, block, other)
        for block, other in ((first, second), (second, first))
    }
    values = pair_values(view, ends, within, private)
    edge, beside = _row(tables.edges, ends), _row(tables.group_pairs, ends)
    counted = counted_rows(view.shared([block for block, _ in ends]), view)
    lines, doubts = [*_standing(edge, beside, values, settings.network.fdr, counted)], []
    if edge is not None:
        lines += _basis_lines(edge, within)
        doubts = doubts_of(edge, settings.network.fdr)
    lines += _group_lines(values)
    doubts += _group_doubts(values)
    numbers = {**(edge or beside or {}), "n": len(values.samples), "r_adjusted": values.r}
    points = _points(values, (_title(a), _title(b)))
    drawing = draw_pair(points, _file_name(ends))
    title = f"{_title(a)} and {_title(b)}"
    return Story(
        title,
        {key: _plain(value) for key, value in numbers.items()},
        tuple(lines),
        tuple(doubts),
        None,
        drawing,
    )


def _row(table: pd.DataFrame, ends: Sequence[tuple[str, str]]) -> dict[str, Any] | None:
    names = table[ENDS].astype(str)
    wanted = [text for end in ends for text in end]
    found = table[(names == wanted).all(axis=1)] if len(table) else table
    return None if found.empty else {str(key): value for key, value in found.iloc[0].items()}


def _standing(
    edge: dict[str, Any] | None, beside: dict[str, Any] | None, values: PairValues, fdr: float, counted: str
) -> list[str]:
    if edge is not None:
        return [
            f"an edge: r = {edge['r']:.2f} (95 % interval {edge['r_low']:.2f} to {edge['r_high']:.2f}, widened since "
            f"edges are picked for being strong) on {counted}, p = {edge['p']:.2g}",
            f"of the edges as strong as this or stronger, a share of {edge['q']:.2g} is expected to be chance (q)",
        ]
    told = f"no edge: r = {values.r:.2f} on {counted} after adjustment"
    if beside is None:
        return [
            f"{told}; it did not pass at a false-discovery rate of {fdr:g}, which is no evidence of no relation"
        ]
    return [
        f"{told}; it passes only with the group left in (r_total = {beside['r_total']:.2f}, "
        f"q_total = {beside['q_total']:.2g})",
        "the group alone explains it (basis: group)"
        if beside["basis"] == "group"
        else "whether the group alone explains it cannot be told (basis: unclear)",
    ]


def _basis_lines(edge: dict[str, Any], within: bool) -> list[str]:
    total = edge.get("r_total")
    if not within or total is None or pd.isna(total):
        return []
    return [f"it holds within groups; with the group left in r is {total:.2f}"]


def _group_lines(values: PairValues) -> list[str]:
    found = values.r_by_group()
    told = [f"{level} {r:.2f} ({n} samples)" for level, (n, r) in found.items() if n >= FEWEST_IN_GROUP]
    return [f"r inside each group: {', '.join(told)}"] if len(told) > 1 else []


def _group_doubts(values: PairValues) -> list[str]:
    signs = {np.sign(r) for n, r in values.r_by_group().values() if n >= FEWEST_IN_GROUP and abs(r) >= 0.2}
    return ["the groups disagree about its sign: look at the figure"] if len(signs) > 1 else []


def _points(values: PairValues, names: tuple[str, str]) -> PairPoints:
    grouped = values.groups is not None
    return PairPoints(
        names=names,
        samples=values.samples,
        raw=np.column_stack([values.x, values.y]),
        adjusted=np.column_stack([values.x_adjusted, values.y_adjusted]),
        filled=values.x_imputed | values.y_imputed,
        codes=values.groups.codes
        if values.groups is not None
        else np.zeros(len(values.samples), dtype=np.intp),
        levels=tuple(values.groups.levels) if grouped and values.groups is not None else (),
        r=(correlation(values.x, values.y), values.r),
        removed=values.removed,
    )


def _title(row: pd.Series) -> str:
    label, feature = str(row["label"]), str(row["feature"])
    return feature if label == feature else f"{label} ({feature})"


def _file_name(ends: Sequence[tuple[str, str]]) -> str:
    """Return a name for the figure's file: letters and digits of the ends, and a hash that keeps it apart."""
    plain = ["".join(c if c.isascii() and c.isalnum() else "_" for c in name)[:40] for _, name in ends]
    digest = hashlib.sha256("\x1f".join(text for end in ends for text in end).encode()).hexdigest()[:6]
    return f"{'__'.join(plain)}_{digest}"


def _plain(value: Any) -> Any:
    if isinstance(value, np.generic):
        value = value.item()
    return None if isinstance(value, float) and not np.isfinite(value) else value


def keep_figures(
    root: Path, analysis: str, stories: Sequence[Story], file: Path | None = None
) -> tuple[Path, ...]:
    """Write the scatters of some pairs and return their files.

    Without a ``file`` they go below the analysis' results as SVG and PNG; where that cannot be written none is.

    Raises
    ------
    InputError
        When one file is named for several figures, or with an ending that is no format.
    """
    drawings = [story.drawing for story in stories if story.drawing is not None]
    if file is not None:
        return (_named_file(drawings, file),)
    folder = root / "results" / analysis / SHOWN
    written = []
    for drawing in drawings:
        for ending in FORMATS:
            path = folder / f"{drawing.name}.{ending}"
            try:
                make_folders(folder)
                write_whole(path, figure_bytes(drawing, ending))
            except OSError:
                return ()
            written.append(path)
    return tuple(written)


def _named_file(drawings: list[Drawing], file: Path) -> Path:
    if len(drawings) != 1:
        raise InputError(
            f"{file}: a scatter is of one pair, and {len(drawings)} pairs are shown; name two features"
        )
    ending = file.suffix.lower().removeprefix(".")
    for known in FORMATS:
        if ending == known:
            write_whole(file, figure_bytes(drawings[0], known))
            return file
    raise InputError(
        f"{file}: no figures of this kind; allowed: {', '.join(f'.{known}' for known in FORMATS)}"
    )
