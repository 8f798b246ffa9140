"""From a block's settings to its measured values, aligned to the sample sheet."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from workbench.errors import InputError
from workbench.settings.schema import BlockSettings

from .annotations import OWN_COLUMNS, add_delivered, annotated_features, read_annotations
from .combine import mixed_columns
from .faults import counted, listed, shown
from .measured import Measured, measured
from .swaps import swap_lines
from .table import DeliveredTable

if TYPE_CHECKING:
    import anndata

_CHUNK = 2**20


@dataclass(frozen=True)
class BlockBuild:
    """A block as built from its delivered table.

    Attributes
    ----------
    adata
        AnnData, samples x features: ``X`` measured values (float64, missing = NaN), ``obs`` the sheet's rows
        of the block's samples in sheet order, ``var`` the annotations, ``uns["workbench"]`` one JSON string.
        With a run sheet ``X`` is the mean over a sample's runs (the sum for counts), ``uns["run_sheet"]`` a
        DataFrame of the runs that have values (samples of the sheet, pools, blanks), and ``uns["run_values"]``
        their values (float64, runs x features).
    lines
        What a person should read: orientation, samples matched and left out, what was accepted.
    decisions
        What was understood of the delivered table, in at most five lines; one more for its run sheet, and one
        for its swaps.
    chosen
        Entries for ``project.toml`` that a rebuild needs to read the table the same, and the settings lack:
        ``samples_in``, ``sheet``, ``array``, ``decimal``.
    """

    adata: anndata.AnnData
    lines: tuple[str, ...]
    decisions: tuple[str, ...] = ()
    chosen: Mapping[str, str] = field(default_factory=dict)


def build_block(settings: BlockSettings, name: str, root: str | Path, sheet: pd.DataFrame) -> BlockBuild:
    """Return a block's measured values from its delivered table.

    Samples that the study or the block excludes stay in: they are left out when the values are prepared.
    Features that are constant or missing throughout stay in as well.

    Parameters
    ----------
    settings
        The block's entry in ``project.toml``.
    name
        Name of the block.
    root
        The project's folder; files in the settings are relative to it.
    sheet
        Sample sheet, indexed by sample id.

    Raises
    ------
    InputError
        When the table or its annotations cannot be used as they are.
    """
    import anndata  # takes a second to load: not for commands that read no block

    found = measured(settings, Path(root), [str(sample) for sample in sheet.index])
    table = found.table
    features = tuple(found.values.columns)
    var, lines = _annotations(settings, Path(root), features)
    _check_free(Path(root), settings, var)
    lines += add_delivered(var, table)
    if settings.values == "mixed":
        var["kind"] = ["text" if feature in table.levels else "number" for feature in features]
        var["levels"] = [_levels(table, feature) for feature in features]
    adata = anndata.AnnData(
        X=found.values.to_numpy(dtype=np.float64), obs=sheet.loc[list(found.values.index)].copy(), var=var
    )
    adata.uns["workbench"] = _account(settings, name, Path(root), found)
    runs = [*found.lines, *_add_runs(adata, found, settings)]
    swaps = swap_lines(settings.swap)
    parts = (f"{part}: {'; '.join(told)}" for part, told in (("runs", runs), ("swap", swaps)) if told)
    return BlockBuild(
        adata,
        (_summary(name, found, len(sheet)), *table.notes, *runs, *swaps, *lines),
        (*table.decisions, *parts),
        _chosen(settings, table),
    )


def _chosen(settings: BlockSettings, table: DeliveredTable) -> dict[str, str]:
    found = {entry: getattr(table, entry) for entry in ("samples_in", "sheet", "array", "decimal")}
    return {
        entry: value
        for entry, value in found.items()
        if value is not None and getattr(settings, entry, None) is None
    }


def _add_runs(adata: anndata.AnnData, found: Measured, settings: BlockSettings) -> list[str]:
    """Put the runs beside the block's values; return what is odd about their columns."""
    if found.runs is None or settings.runs is None:
        return []
    adata.uns["run_sheet"], adata.uns["run_values"] = found.runs, found.run_values
    both = [name for name in settings.adjust if name in found.runs and name in adata.obs]
    told = [
        f"column {shown(name)} stands in the sample sheet too; for this block it is the run sheet's"
        for name in both
    ]
    file = Path(settings.runs).name
    return [f"{file}: {line}" for line in (*mixed_columns(adata), *told)]


def content_hash(values: np.ndarray, samples: Sequence[str], features: Sequence[str]) -> str:
    """Return the sha256 of a table's content: sample ids, feature ids and the float64 values in row order.

    Every missing value counts as the same NaN, and -0.0 as 0.0, so that equal tables have equal hashes.
    """
    digest = hashlib.sha256(json.dumps([list(samples), list(features)]).encode())
    plain = np.ascontiguousarray(values, dtype="<f8") + 0.0
    plain[np.isnan(plain)] = np.nan
    digest.update(plain.tobytes())
    return digest.hexdigest()


def _annotations(
    settings: BlockSettings, root: Path, features: Sequence[str]
) -> tuple[pd.DataFrame, list[str]]:
    index = pd.Index(list(features), dtype="object")
    if settings.annotations is None:
        return pd.DataFrame(index=index), []
    path = root / settings.annotations
    var = read_annotations(path, features)
    known = set(annotated_features(path))
    without = [feature for feature in features if feature not in known]
    extra = len(known.difference(features))
    lines = [
        f"{path.name}: {counted(len(features) - len(without), 'feature')} of {len(features):,} annotated"
    ]
    if without:
        lines.append(f"{path.name}: without annotation: {listed(without)}")
    if extra:
        lines.append(
            f"{path.name}: {counted(extra, 'row is', 'rows are')} of features that the table does not "
            "have; left out"
        )
    return var, lines


def _check_free(root: Path, settings: BlockSettings, var: pd.DataFrame) -> None:
    taken = [column for column in OWN_COLUMNS if column in var.columns]
    if taken and settings.annotations is not None:
        raise InputError(
            f"{root / settings.annotations}: column {listed(taken)} has a name that blocks use themselves; "
            "rename it in the annotations"
        )


def _levels(table: DeliveredTable, feature: str) -> str:
    return json.dumps(list(table.levels[feature]), ensure_ascii=False) if feature in table.levels else ""


def _account(settings: BlockSettings, name: str, root: Path, found: Measured) -> str:
    account: dict[str, object] = {
        "kind": "measured",
        "block": name,
        "layer": settings.layer,
        "values": settings.values,
        "source_sha256": _sha256(root / settings.file),
        "content_sha256": _content(found.values.to_numpy(), found.values.index, found.values.columns),
        "samples_in": found.table.samples_in,
    }
    if settings.names is not None:
        account["names_sha256"] = _sha256(root / settings.names)
    if found.runs is not None and found.run_values is not None and settings.runs is not None:
        account["runs_sha256"] = _sha256(root / settings.runs)
        account["run_values_sha256"] = _content(found.run_values, found.runs.index, found.values.columns)
    if settings.swap:
        account["swap"] = [swap.model_dump(mode="json") for swap in settings.swap]
    return json.dumps(account, sort_keys=True, ensure_ascii=False)


def _content(values: np.ndarray, rows: pd.Index, columns: pd.Index) -> str:
    return content_hash(values, list(rows), list(columns))


def _sha256(path: Path) -> str:
    digest = hashlib.sha256()
    with path.open("rb") as file:
        while chunk := file.read(_CHUNK):
            digest.update(chunk)
    return digest.hexdigest()


def _summary(name: str, found: Measured, n: int) -> str:
    samples, features = (
        counted(k, what) for k, what in zip(found.values.shape, ("sample", "feature"), strict=True)
    )
    return f"block '{name}': {features}, {samples} of the sheet's {n}"
