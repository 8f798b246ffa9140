"""Delivered tables and sample sheets, read and checked: refused with place and way out, or told what was taken."""

from .annotations import read_annotations
from .block import BlockBuild, build_block
from .block_changes import BlockDifference, difference
from .combine import block_design_columns, with_run_columns
from .design import Design, Groups, design_columns, group_codes, missing_samples
from .identifiers import (
    IdentifierColumn,
    IdentifierFault,
    date_like,
    identifier_columns,
    identifier_kind,
    read_identifiers,
    split_identifiers,
)
from .measured import offered_names
from .names import NameMatch, OfferedNamesError, match_names, names_table
from .names_file import read_names
from .raw import RawTable
from .readers import read_delivered
from .runs import RunSheet, read_run_sheet, run_columns, run_columns_of
from .sheet import SampleSheet, Suggestions, column_kind, read_sample_sheet, suggest_columns
from .sheet_changes import SheetDifference, sheet_difference
from .table import DeliveredTable, delivered_table

__all__ = [
    "BlockBuild",
    "BlockDifference",
    "DeliveredTable",
    "Design",
    "Groups",
    "IdentifierColumn",
    "IdentifierFault",
    "NameMatch",
    "OfferedNamesError",
    "RawTable",
    "RunSheet",
    "SampleSheet",
    "SheetDifference",
    "Suggestions",
    "block_design_columns",
    "build_block",
    "column_kind",
    "date_like",
    "delivered_table",
    "design_columns",
    "difference",
    "group_codes",
    "identifier_columns",
    "identifier_kind",
    "match_names",
    "missing_samples",
    "names_table",
    "offered_names",
    "read_annotations",
    "read_delivered",
    "read_identifiers",
    "read_names",
    "read_run_sheet",
    "read_sample_sheet",
    "run_columns",
    "run_columns_of",
    "sheet_difference",
    "split_identifiers",
    "suggest_columns",
    "with_run_columns",
]
