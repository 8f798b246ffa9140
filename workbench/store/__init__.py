"""The project's directory: whole changes, one writer at a time, hashes, blocks and tables."""

from workbench.store.h5ad import read_block, write_block
from workbench.store.hashes import FileFault, check_all, check_file, sha256_of, sha256_of_bytes
from workbench.store.journal import append, read_journal
from workbench.store.lock import project_lock, settle
from workbench.store.manifest import Manifest, StageRecord, read_manifest
from workbench.store.paths import ProjectPaths, find_project
from workbench.store.recovery import recover
from workbench.store.tables import json_bytes, read_table, table_bytes
from workbench.store.transaction import Change

__all__ = [
    "Change",
    "FileFault",
    "Manifest",
    "ProjectPaths",
    "StageRecord",
    "append",
    "check_all",
    "check_file",
    "find_project",
    "json_bytes",
    "project_lock",
    "read_block",
    "read_journal",
    "read_manifest",
    "read_table",
    "recover",
    "settle",
    "sha256_of",
    "sha256_of_bytes",
    "table_bytes",
    "write_block",
]
