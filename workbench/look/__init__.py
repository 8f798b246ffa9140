"""The first look: each block on its own and every two blocks beside each other, in numbers and in words."""

from workbench.look.between import BetweenLook, PairLook, Restriction, between_reading, look_between
from workbench.look.block import BlockLook, SampleFlag, look_at_block
from workbench.look.preparation import (
    PreparationLook,
    look_at_preparation,
    preparation_reading,
    preparation_tables,
)
from workbench.look.reading import block_reading
from workbench.look.tables import between_table, look_tables
from workbench.look.view import BlockView, Levels, levels_of

__all__ = [
    "BetweenLook",
    "BlockLook",
    "BlockView",
    "Levels",
    "PairLook",
    "PreparationLook",
    "Restriction",
    "SampleFlag",
    "between_reading",
    "between_table",
    "block_reading",
    "levels_of",
    "look_at_block",
    "look_at_preparation",
    "look_between",
    "look_tables",
    "preparation_reading",
    "preparation_tables",
]
