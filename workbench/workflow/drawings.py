"""Figures and their captions as files of a stage."""

from __future__ import annotations

import pandas as pd

from workbench.figures import Drawing, figure_files
from workbench.store import Change, table_bytes


def write_drawings(
    change: Change, folder: str, drawings: tuple[Drawing, ...], captions_file: str = "captions.tsv"
) -> list[str]:
    """Write the figures and their captions below a folder of the project; return the names of all files.

    Stages that share a folder each name a captions file of their own.
    """
    written = [f"{folder}/{captions_file}"]
    captions = pd.DataFrame([(one.name, one.caption) for one in drawings], columns=["figure", "caption"])
    change.write_bytes(written[0], table_bytes(captions))
    for file, content in figure_files(drawings):
        written.append(f"{folder}/{file}")
        change.write_bytes(written[-1], content)
    return written
