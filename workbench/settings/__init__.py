"""``project.toml``: what it may hold, its faults in plain words, and edits that keep the rest."""

from workbench.settings.cross_check import cross_check
from workbench.settings.edit import add_block as add_block_text
from workbench.settings.edit import new_project as new_project_text
from workbench.settings.edit import remove_block as remove_block_text
from workbench.settings.edit import set_samples as set_samples_text
from workbench.settings.layers import LAYERS, layer_fault
from workbench.settings.load import load_settings, parse_settings, read_settings_text
from workbench.settings.names import check_name, hint, name_fault, nearest
from workbench.settings.prepare_keys import PrepareKey, prepare_keys, toml_text
from workbench.settings.prepare_schema import PrepareSettings, prepare_settings
from workbench.settings.salvage import independent as independent_faults
from workbench.settings.salvage import salvaged_settings
from workbench.settings.schema import (
    VALUES,
    AnalysisSettings,
    BlockSettings,
    CheckSettings,
    NetworkSettings,
    PathwaySettings,
    SamplesSettings,
    Settings,
    StudySettings,
    Swap,
)

__all__ = [
    "LAYERS",
    "VALUES",
    "AnalysisSettings",
    "BlockSettings",
    "CheckSettings",
    "NetworkSettings",
    "PathwaySettings",
    "PrepareKey",
    "PrepareSettings",
    "SamplesSettings",
    "Settings",
    "StudySettings",
    "Swap",
    "add_block_text",
    "check_name",
    "cross_check",
    "hint",
    "independent_faults",
    "layer_fault",
    "load_settings",
    "name_fault",
    "nearest",
    "new_project_text",
    "parse_settings",
    "prepare_keys",
    "prepare_settings",
    "read_settings_text",
    "remove_block_text",
    "salvaged_settings",
    "set_samples_text",
    "toml_text",
]
