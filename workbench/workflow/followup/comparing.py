"""``workbench compare``: two analyses, of one project or of two, pair by pair."""

from __future__ import annotations

import json
import re
from collections.abc import Collection, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from workbench.errors import InputError
from workbench.figures.comparison import draw_comparison
from workbench.intake.faults import counted
from workbench.network.comparison import (
    PairSide,
    adjusted_over,
    adjusted_rand,
    community_table,
    difference_p,
    statuses,
)
from workbench.store import Change, ProjectPaths, StageRecord, project_lock, read_manifest, table_bytes
from workbench.workflow.drawings import write_drawings
from workbench.workflow.followup.compared_sides import (
    Key,
    Side,
    best_column,
    common_columns,
    dependence,
    edge_keys,
    keyed,
    read_side,
    resolve_side,
    row_of,
    tested_pairs,
)
from workbench.workflow.followup.pathway_tables import block_places

FDR = 0.05
SENTENCE_ROWS = 5
COLUMNS = (
    *(
        "source",
        "target",
        "source_layer",
        "target_layer",
        "status",
        "changed",
        "r_first",
        "r_second",
        "p",
        "q",
    ),
    *("why", "q_first", "q_second", "source_first", "target_first", "source_second", "target_second"),
)


@dataclass(frozen=True, eq=False)
class Comparison:
    """What two analyses have in common and what not.

    ``pairs`` is compared.tsv, ``communities`` and ``settings`` the tables of that name; ``agreement`` the adjusted Rand
    index of the communities over features that have an edge in both (NaN for fewer than two).
    """

    names: tuple[str, str]
    by: str
    pairs: pd.DataFrame
    communities: pd.DataFrame
    settings: pd.DataFrame
    agreement: float
    in_both: int
    notes: tuple[str, ...]

    def sentences(self) -> list[str]:
        """Return the comparison in words."""
        first, second = self.names
        count = self.pairs["status"].value_counts()
        told = [
            f"{first} has {counted(self._edges('lost'), 'edge')} and {second} {self._edges('gained')}, "
            f"matched by {self.by}: "
            + ", ".join(
                f"{int(count.get(status, 0))} {status}" for status in ("kept", "reversed", "gained", "lost")
            )
        ]
        changed = self.pairs[self.pairs["changed"] == "yes"]
        tested = int((self.pairs["changed"] != "not tested").sum())
        if tested:
            told.append(
                f"{len(changed)} of {tested} tested pairs differ in their correlation at a false-discovery rate of "
                f"{FDR:g}; a pair that is an edge in one alone need not differ"
            )
        told += [
            f"  {row['source']} and {row['target']}: {row['status']}, r {row['r_first']:.2f} and {row['r_second']:.2f}"
            for row in changed.head(SENTENCE_ROWS).to_dict("records")
        ]
        if self.agreement == self.agreement:
            told.append(
                f"communities agree at {self.agreement:.2f} (adjusted Rand index over {self.in_both} features with an "
                "edge in both; 1 equal, 0 as by chance)"
            )
        told.append(
            f"{counted(len(self.settings), 'setting differs', 'settings differ')} (settings.tsv)"
            if len(self.settings)
            else "no setting differs"
        )
        return [*told, *self.notes]

    def _edges(self, alone: str) -> int:
        return int(self.pairs["status"].isin(["kept", "reversed", alone]).sum())


def compare(first: Side, second: Side, *, by: str | None = None) -> Comparison:
    """Return the comparison of two analyses.

    Parameters
    ----------
    first, second : Side
    by : str, optional
        Column of both features tables by which features are matched; left out: the one that matches most features.
    """
    chosen = by or best_column(first.features, second.features)
    notes: list[str] = []
    for side in (first, second):
        side.rows = keyed(side, chosen, notes)
    common = first.rows.keys() & second.rows.keys()
    if not common:
        raise InputError(
            f"{first.name} and {second.name} have no feature in common by column '{chosen}'; name a column that both "
            "have with --by: " + ", ".join(common_columns(first.features, second.features))
        )
    keys = sorted(edge_keys(first) | edge_keys(second))
    sides = [_pair_side(side, keys) for side in (first, second)]
    why = dependence(first, second)
    pairs = _pairs_table(keys, (first, second), sides, why)
    if why:
        notes.append(f"differences are not tested: {why}")
    communities = [_communities(side) for side in (first, second)]
    both = sorted(communities[0].keys() & communities[1].keys())
    agreement = adjusted_rand([communities[0][key] for key in both], [communities[1][key] for key in both])
    return Comparison(
        (first.name, second.name),
        chosen,
        pairs,
        community_table(*communities),
        differing_settings(first, second),
        agreement,
        len(both),
        tuple(notes),
    )


def _pair_side(side: Side, keys: Sequence[tuple[Key, Key]]) -> PairSide:
    """Return the pairs as one side has them: edge or not, correlation, rows that it rests on."""
    edges = edge_keys(side)
    r, rows = np.full((2, len(keys)), np.nan)
    places, blocks = block_places(side.views, side.features), side.features["block"].to_numpy()
    by_blocks: dict[tuple[str, str], list[tuple[int, int, int]]] = {}
    for number, (a, b) in enumerate(keys):
        if a in side.rows and b in side.rows:
            first, second = side.rows[a], side.rows[b]
            by_blocks.setdefault((blocks[first], blocks[second]), []).append((number, first, second))
    for pair, found in by_blocks.items():
        held = side.views.of(pair)
        number, first, second = np.array(found, dtype=np.intp).T
        x, y = held.values[pair[0]][:, places[first]], held.values[pair[1]][:, places[second]]
        r[number], rows[number] = np.clip((x * y).sum(axis=0), -1.0, 1.0), held.rows
    return PairSide(np.array([key in edges for key in keys], dtype=np.bool_), r, rows)


def _pairs_table(
    keys: Sequence[tuple[Key, Key]], sides: tuple[Side, Side], pairs: Sequence[PairSide], dependence: str
) -> pd.DataFrame:
    first, second = pairs
    status = statuses(first, second)
    ranks = sides[0].views.view.settings.network.correlation == "spearman"
    p = difference_p(first, second, ranks=ranks) if not dependence else np.full(len(keys), np.nan)
    q = adjusted_over(p, tested_pairs(*sides))
    measured = ~np.isnan(first.r) & ~np.isnan(second.r)
    why = np.where(np.isnan(first.r), f"not measured in {sides[0].name}", "")
    why = np.where(np.isnan(second.r), f"not measured in {sides[1].name}", why)
    why = np.where(measured & bool(dependence), "samples in both", why)
    changed = np.where(np.isnan(p), "not tested", np.where(q <= FDR, "yes", "no"))
    ends = _in_order_of_layers(keys, sides)
    table = pd.DataFrame(
        {
            "source": [a[1] for a, _ in ends],
            "target": [b[1] for _, b in ends],
            "source_layer": [a[0] for a, _ in ends],
            "target_layer": [b[0] for _, b in ends],
            "status": status,
            "changed": changed,
            "r_first": first.r,
            "r_second": second.r,
            "p": p,
            "q": q,
            "why": why,
        }
    )
    for side, name in zip(sides, ("first", "second"), strict=True):
        table[f"q_{name}"] = _edge_q(side, keys)
        names = side.features["feature"].to_numpy()
        for end, place in (("source", 0), ("target", 1)):
            table[f"{end}_{name}"] = [
                names[side.rows[pair[place]]] if pair[place] in side.rows else "" for pair in ends
            ]
    rank = {"reversed": 0, "gained": 1, "lost": 1, "kept": 2}
    order = table.assign(
        shown=(table["changed"] != "yes"),
        kind=table["status"].map(rank),
        apart=-(table["r_first"] - table["r_second"]).abs().fillna(0.0),
    ).sort_values(["shown", "q", "kind", "apart", "source", "target"], kind="stable")
    return table.loc[order.index, list(COLUMNS)].reset_index(drop=True)


def _in_order_of_layers(keys: Sequence[tuple[Key, Key]], sides: tuple[Side, Side]) -> list[tuple[Key, Key]]:
    """Return both ends of each pair, source and target in the order of the first analysis' layers."""
    layers = list(dict.fromkeys(layer for side in sides for layer in side.views.view.layers))
    return [(a, b) if layers.index(a[0]) <= layers.index(b[0]) else (b, a) for a, b in keys]


def _edge_q(side: Side, keys: Sequence[tuple[Key, Key]]) -> list[float]:
    """Return the q of each pair that is an edge of a side."""
    own = {row: key for key, row in side.rows.items()}
    place = row_of(side.features)
    q: dict[tuple[Key, Key], float] = {}
    for edge in side.edges.to_dict("records"):
        ends = [own.get(place[edge[f"{end}_block"], edge[end]]) for end in ("source", "target")]
        if ends[0] is not None and ends[1] is not None:
            q[min(ends[0], ends[1]), max(ends[0], ends[1])] = float(edge["q"])
    return [q.get(key, np.nan) for key in keys]


def _communities(side: Side) -> dict[Key, int]:
    """Return the community of each matched feature that has an edge."""
    numbers = pd.to_numeric(side.features["community"], errors="coerce").to_numpy(dtype=float)
    return {key: int(numbers[row]) for key, row in side.rows.items() if np.isfinite(numbers[row])}


def differing_settings(first: Side, second: Side) -> pd.DataFrame:
    """Return settings.tsv: each setting, version and count of samples in which two analyses differ."""
    both = first.views.view.blocks.keys() & second.views.view.blocks.keys()
    held = [_flat(_told(side, both)) for side in (first, second)]
    names = list(dict.fromkeys([*held[0], *held[1]]))
    rows = [
        (name, held[0].get(name, ""), held[1].get(name, ""))
        for name in names
        if held[0].get(name, "") != held[1].get(name, "")
    ]
    return pd.DataFrame(rows, columns=["setting", "first", "second"])


def _told(side: Side, both: Collection[str]) -> dict[str, Any]:
    """Return what an analysis was made by; of a block that only one of the two has, that it has it."""
    view, inputs = side.views.view, side.record.get("inputs", {})
    return {
        "analysis": view.settings.model_dump(mode="json", exclude={"pathways"}),
        "samples": view.study.samples.model_dump(mode="json"),
        "blocks": {
            name: block.settings.model_dump(mode="json", exclude={"file", "annotations", "runs", "names"})
            if name in both
            else f"{block.settings.layer}, in this analysis alone"
            for name, block in view.blocks.items()
        },
        "versions": side.record.get("versions", {}),
        "samples tested": len(side.samples),
        "features": {name: len(view.blocks[name].features) for name in view.blocks if name in both},
        "inputs": {f"block {name}": inputs.get(f"block {name}", "") for name in view.blocks if name in both},
    }


def _flat(value: Any, name: str = "") -> dict[str, str]:
    """Return nested settings as one level, names joined by points."""
    if isinstance(value, dict) and value:
        found: dict[str, str] = {}
        for key, item in value.items():
            found |= _flat(item, f"{name}.{key}" if name else str(key))
        return found
    return {name: value if isinstance(value, str) else json.dumps(value, ensure_ascii=False)}


def run_compare(here: ProjectPaths | None, words: tuple[str, str], by: str | None) -> tuple[Comparison, Path]:
    """Compare what two words name, write the answer below ``results/compare/``, and return it with its folder.

    The answer is kept in the project here, without one in the project of the first word.
    """
    found = [resolve_side(word, here) for word in words]
    home = here or found[0][0]
    names = _names(found)
    sides = [read_side(*one, name) for one, name in zip(found, names, strict=True)]
    comparison = compare(sides[0], sides[1], by=by)
    folder = f"results/compare/{_folder_name(names)}"
    with project_lock(home.root, "compare"), Change(home.root) as change:
        written = _write(change, folder, comparison)
        inputs = {f"{side.name} {file}": digest for side in sides for file, digest in _hashes(side).items()}
        change.record_stage(
            f"compare:{_folder_name(names)}", StageRecord(inputs=inputs, outputs=tuple(written))
        )
        change.commit({"command": "compare", "first": names[0], "second": names[1], "by": comparison.by})
    return comparison, home.root / folder


def _hashes(side: Side) -> dict[str, str]:
    files = read_manifest(side.root).files
    return {name: files.get(f"results/{side.analysis}/{name}", "") for name in ("edges.tsv", "features.tsv")}


def _names(found: Sequence[tuple[ProjectPaths, str]]) -> tuple[str, str]:
    """Return what the two analyses are called: by analysis in one project, by folder too in two."""
    (first, a), (second, b) = found
    if first.root == second.root:
        return a, b
    names = [f"{paths.root.name}:{analysis}" for paths, analysis in found]
    if names[0] == names[1]:
        names = [f"{paths.root.parent.name}/{paths.root.name}:{analysis}" for paths, analysis in found]
    return names[0], names[1]


def _folder_name(names: tuple[str, str]) -> str:
    return "_and_".join(re.sub(r"[^A-Za-z0-9_-]+", "-", name).strip("-") or "project" for name in names)


def _write(change: Change, folder: str, comparison: Comparison) -> list[str]:
    tables = {
        "compared.tsv": comparison.pairs,
        "communities.tsv": comparison.communities,
        "settings.tsv": comparison.settings,
    }
    written = []
    for file, table in tables.items():
        written.append(f"{folder}/{file}")
        change.write_bytes(written[-1], table_bytes(table))
    written.append(f"{folder}/summary.txt")
    change.write_text(written[-1], "\n".join(comparison.sentences()) + "\n")
    return [*written, *write_drawings(change, folder, draw_comparison(comparison.pairs, comparison.names))]
