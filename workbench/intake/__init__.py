"""Delivered tables and sample sheets, read and checked: refused with place and way out, or told what was taken."""

from .annotations import read_annotations
from .block import BlockBuild, build_block
from .design import Design, Groups, design_columns, group_codes, missing_samples
from .raw import RawTable
from .readers import read_delivered
from .sheet import SampleSheet, Suggestions, column_kind, read_sample_sheet, suggest_columns
from .table import DeliveredTable, delivered_table

__all__ = [
    "BlockBuild",
    "DeliveredTable",
    "Design",
    "Groups",
    "RawTable",
    "SampleSheet",
    "Suggestions",
    "build_block",
    "column_kind",
    "delivered_table",
    "design_columns",
    "group_codes",
    "missing_samples",
    "read_annotations",
    "read_delivered",
    "read_sample_sheet",
    "suggest_columns",
]
