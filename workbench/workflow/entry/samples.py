"""The sample sheet: imported once, kept as a plain table that a person may edit."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from workbench.errors import InputError, SettingsError
from workbench.intake import (
    Suggestions,
    column_kind,
    group_codes,
    missing_samples,
    read_sample_sheet,
    sheet_difference,
    suggest_columns,
)
from workbench.intake.faults import shown
from workbench.settings import (
    SamplesSettings,
    cross_check,
    load_settings,
    parse_settings,
    read_settings_text,
    set_samples_text,
)
from workbench.store import Change, ProjectPaths, project_lock, table_bytes
from workbench.workflow.entry.blocks import Tell, empty_cells_line, no_words, require_columns
from workbench.workflow.entry.sources import delivered_file, keep_source
from workbench.workflow.state import load_state
from workbench.workflow.subjects import visit_lines

MOST_LEVELS = 8


@dataclass(frozen=True)
class SheetDelivery:
    """A sample sheet as it was delivered, and the parts that its columns play."""

    file: Path
    id: str | None = None
    group: tuple[str, ...] = ()
    adjust: tuple[str, ...] = ()
    subject: str | None = None
    time: str | None = None
    replace: bool = False

    @property
    def columns(self) -> list[str]:
        """Columns that were named, whatever their part."""
        ordering = [column for column in (self.subject, self.time) if column is not None]
        return [*self.group, *self.adjust, *ordering]


@dataclass(frozen=True)
class SheetAccount:
    """What was understood of the sheet: how many samples, notes, and columns worth naming."""

    samples: int
    notes: tuple[str, ...]
    kinds: dict[str, str]
    suggestions: Suggestions | None


def add_samples(paths: ProjectPaths, delivery: SheetDelivery, tell: Tell = no_words) -> SheetAccount:
    """Keep the delivered sheet, write ``samples.tsv`` and ``[samples]`` in one step.

    ``tell`` is called with what a replaced sheet changes, before anything is written.

    Raises
    ------
    InputError
        When there is a sheet already, the file is damaged, or a named column is not in it.
    """
    delivered_file(delivery.file)
    with project_lock(paths.root, "add-samples"):
        old = _old_sheet(paths, delivery.replace)
        _require_fitting(paths, old, delivery)
        sheet = read_sample_sheet(delivery.file, id_column=delivery.id)
        frame = sheet.frame
        require_columns(delivery.columns, list(frame.columns), delivery.file)
        kinds = unclear_kinds(frame, delivery.adjust)
        text = read_settings_text(paths.settings)
        before = parse_settings(text, paths.settings).samples
        text = set_samples_text(
            text,
            id=str(frame.index.name),
            group=list(delivery.group),
            subject=delivery.subject,
            time=delivery.time,
            adjust=list(delivery.adjust),
            kinds=kinds,
        )
        settings = parse_settings(text, paths.settings)
        faults = cross_check(settings, frame, paths.root)
        if faults:
            raise SettingsError(faults)
        if old is not None:
            tell([*sheet_difference(old, frame).lines(), *_changed_parts(before, settings.samples)])
        with Change(paths.root) as change:
            file, digest = keep_source(change, paths, delivery.file)
            change.write_bytes("samples.tsv", table_bytes(frame.reset_index()))
            change.write_text("project.toml", text)
            sources = [{"file": file, "sha256": digest, "delivered_as": delivery.file.name}]
            change.commit({"command": "add-samples", "sources": sources})
    unnamed = not delivery.columns
    notes = (*sheet.notes, *empty_cells(frame, settings.samples), *order_lines(frame, settings.samples))
    return SheetAccount(len(frame), notes, kinds, suggest_columns(frame) if unnamed else None)


def _old_sheet(paths: ProjectPaths, replace: bool) -> pd.DataFrame | None:
    """Return the sheet that is there; one that does not fit the settings may be replaced all the same."""
    try:
        return load_state(paths).sheet
    except SettingsError:
        if not replace or not paths.samples.exists():
            raise
        load_settings(paths.settings)
        return read_sample_sheet(paths.samples).frame


def _changed_parts(before: SamplesSettings, now: SamplesSettings) -> list[str]:
    """Return which columns play another part than before, a sentence each."""
    told = []
    for key in ("id", "group", "adjust", "subject", "time"):
        old, new = (_columns_of(getattr(samples, key)) for samples in (before, now))
        if old != new:
            told.append(f"{key}: {new} now, {old} before")
    return told


def _columns_of(value: str | tuple[str, ...] | None) -> str:
    columns = (value,) if isinstance(value, str) else value or ()
    return ", ".join(map(repr, columns)) or "none"


def empty_cells(frame: pd.DataFrame, samples: SamplesSettings) -> tuple[str, ...]:
    """Return a sentence for each column of the design that says nothing of a sample which is not left out."""
    parts = {
        "group": samples.group,
        "adjust": samples.adjust,
        "subject": [samples.subject] if samples.subject else [],
        "time": [samples.time] if samples.time else [],
    }
    told = []
    for part, columns in parts.items():
        for column, names in missing_samples(frame, list(columns)).items():
            lacking = [name for name in names if name not in samples.exclude]
            if lacking:
                told.append(empty_cells_line(column, part, lacking))
    return tuple(told)


def order_lines(frame: pd.DataFrame, samples: SamplesSettings) -> tuple[str, ...]:
    """Return a sentence for each factor, its levels in order and the samples of each, and one for the visits."""
    told = []
    for factor in samples.group:
        held = frame.drop(index=list(missing_samples(frame, [factor]).get(factor, ())))
        if held.empty:
            continue
        groups = group_codes(held, factor, samples.order)
        sizes = np.bincount(groups.codes, minlength=len(groups.levels)).tolist()
        named = [f"{shown(level)} ({size})" for level, size in zip(groups.levels, sizes, strict=True)]
        more = [f"and {len(named) - MOST_LEVELS} more"] if len(named) > MOST_LEVELS else []
        listed = ", ".join([*named[:MOST_LEVELS], *more])
        line = f"group {shown(factor)}, levels in order and their samples: {listed}; differences are from the first"
        other = f"; another order is said with order = {{ {factor} = [...] }} under [samples]"
        told.append(line if factor in samples.order else line + other)
    if samples.time is not None:
        told += visit_lines(frame[samples.time], samples.order.get(samples.time))
    return tuple(told)


def _require_fitting(paths: ProjectPaths, old: pd.DataFrame | None, delivery: SheetDelivery) -> None:
    """Refuse a second sheet that nobody said replaces the first, and a replacement of nothing."""
    if old is not None and not delivery.replace:
        raise InputError(
            f"{paths.samples}: the project has a sample sheet; edit that file, the next command reads it again, or say "
            "--replace to put another one in its place"
        )
    if old is None and delivery.replace:
        raise InputError(f"{paths.samples}: there is no sample sheet to replace; leave --replace out")


def unclear_kinds(frame: pd.DataFrame, columns: tuple[str, ...]) -> dict[str, str]:
    """Return ``classes`` for each nuisance column of few whole numbers, to be written into the settings."""
    return {column: "classes" for column in columns if column_kind(frame[column]) == "unclear"}
