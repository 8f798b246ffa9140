"""Delivered tables and sample sheets, read and checked: refused with place and way out, or told what was taken."""

from .annotations import read_annotations
from .block import BlockBuild, build_block
from .design import Design, Groups, design_columns, group_codes, missing_samples
from .names import NameMatch, match_names, names_table
from .raw import RawTable
from .readers import read_delivered
from .sheet import SampleSheet, Suggestions, column_kind, read_sample_sheet, suggest_columns
from .table import DeliveredTable, delivered_table

__all__ = [
    "BlockBuild",
    "DeliveredTable",
    "Design",
    "Groups",
    "NameMatch",
    "RawTable",
    "SampleSheet",
    "Suggestions",
    "build_block",
    "column_kind",
    "delivered_table",
    "design_columns",
    "group_codes",
    "match_names",
    "missing_samples",
    "names_table",
    "read_annotations",
    "read_delivered",
    "read_sample_sheet",
    "suggest_columns",
]
