"""A project as it stands on disk: settings, sample sheet and manifest, read once and checked together."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

import pandas as pd

from workbench.errors import DamageError, InputError, SettingsError, WorkbenchError
from workbench.intake import read_sample_sheet, run_columns_of
from workbench.settings import Settings, cross_check, independent_faults, load_settings, salvaged_settings
from workbench.store import Manifest, ProjectPaths, check_file, read_manifest
from workbench.store.journal import source_hashes

FILES = ("file", "annotations", "runs")


@dataclass(frozen=True)
class ProjectState:
    """Settings, sample sheet (None before ``add-samples``) and manifest of the project at ``paths``.

    ``refused`` holds, while a command runs, why a stage could not be done, by the stage's name.
    """

    paths: ProjectPaths
    settings: Settings
    sheet: pd.DataFrame | None
    manifest: Manifest
    refused: Mapping[str, InputError] = field(default_factory=dict)

    @property
    def root(self) -> Path:
        """Folder of the project."""
        return self.paths.root

    def require_sheet(self) -> pd.DataFrame:
        """Return the sample sheet, or say how to import one."""
        if self.sheet is None:
            raise InputError(
                f"{self.paths.samples}: the project has no sample sheet yet; import one with "
                "`workbench add-samples FILE`"
            )
        return self.sheet

    def require_block(self, name: str) -> None:
        """Refuse a block that the settings do not declare, naming those that they do."""
        if name not in self.settings.blocks:
            raise InputError(f"no block '{name}' in {self.paths.settings}; {_known(self.settings.blocks)}")

    def require_analysis(self, name: str) -> None:
        """Refuse an analysis that the settings do not declare, naming those that they do."""
        if name not in self.settings.analyses:
            raise InputError(
                f"no analysis '{name}' in {self.paths.settings}; {_known(self.settings.analyses)}"
            )

    def one_analysis(self, name: str | None) -> str:
        """Return the named analysis; without a name `main`, or the only one there is."""
        known = list(self.settings.analyses)
        if name is None:
            if len(known) != 1 and "main" not in known:
                raise InputError(f"say which analysis with --analysis NAME; {_known(known)}")
            name = "main" if "main" in known else known[0]
        self.require_analysis(name)
        return name


def load_state(paths: ProjectPaths, replaced: str | None = None) -> ProjectState:
    """Return the project's state; raise `SettingsError` with every fault of settings against data.

    A source that the program has kept and that is gone is damage (`DamageError`). Faults of the block ``replaced``,
    which a command is about to replace or take out, are none.
    """
    try:
        settings = load_settings(paths.settings)
    except SettingsError as error:
        raise SettingsError([*error.faults, *_further_faults(paths)]) from error
    sheet = None
    if paths.samples.exists():
        sheet = read_sample_sheet(paths.samples, id_column=settings.samples.id).frame
        faults = cross_check(settings, sheet, paths.root, run_columns_of(settings.blocks, paths.root))
        if replaced is not None:
            faults = [fault for fault in faults if not fault.startswith(f"project.toml: blocks.{replaced}.")]
        lost = _lost_sources(settings, paths) if faults else {}
        if lost and all(fault.split(": ", 2)[1] in lost for fault in faults):
            raise DamageError("\n".join(dict.fromkeys(lost.values())))
        if faults:
            raise SettingsError(faults)
    return ProjectState(paths, settings, sheet, read_manifest(paths.root))


def _lost_sources(settings: Settings, paths: ProjectPaths) -> dict[str, str]:
    """Return, by key, what to do about the files of blocks that the program has kept and that are not there."""
    kept = source_hashes(paths.root)
    lost = {}
    for name, block in settings.blocks.items():
        for entry in FILES:
            file = getattr(block, entry)
            if file in kept and not (paths.root / file).exists():
                try:
                    check_file(paths.root, file)
                except DamageError as error:
                    lost[f"blocks.{name}.{entry}"] = str(error)
    return lost


def _further_faults(paths: ProjectPaths) -> list[str]:
    """Return what else is wrong with settings that have faults: columns, samples and files that are not there."""
    settings = salvaged_settings(paths.settings)
    if settings is None or not paths.samples.exists():
        return []
    try:
        sheet = read_sample_sheet(paths.samples, id_column=settings.samples.id).frame
        columns = run_columns_of(settings.blocks, paths.root)
    except WorkbenchError:
        return []
    return independent_faults(cross_check(settings, sheet, paths.root, columns))


def _known(names: Iterable[str]) -> str:
    listed = ", ".join(f"'{name}'" for name in names)
    return f"known: {listed}" if listed else "it declares none yet"
