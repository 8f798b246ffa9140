"""Projects of two plain tables, their network built."""

from __future__ import annotations

from pathlib import Path

import pandas as pd

from workbench import Project

SETTINGS = """permutations = 20
repeats = 1

[analyses.main.network]
stability = 0
remove_private = false
"""


def project_of(folder: Path, made: dict[str, pd.DataFrame], renamed: bool = False) -> Project:
    """Return a project of two tables, its network built; ``renamed``: features have other names, the old as symbols."""
    sheet = folder.parent / f"{folder.name}_samples.tsv"
    pd.DataFrame({"sample": made["rna"].index}).to_csv(sheet, sep="\t", index=False)
    project = Project.create(folder, title=folder.name)
    project.add_samples(sheet)
    for name, layer in (("rna", "transcripts"), ("lcms", "metabolites")):
        table, file = made[name], folder.parent / f"{folder.name}_{name}.tsv"
        annotations = None
        if renamed:
            annotations = folder.parent / f"{folder.name}_{name}_names.tsv"
            new = [f"x{number}" for number in range(table.shape[1])]
            pd.DataFrame({"feature": new, "symbol": table.columns}).to_csv(annotations, sep="\t", index=False)
            table = table.set_axis(new, axis=1)
        table.to_csv(file, sep="\t")
        project.add_block(name, file, layer=layer, values="continuous", annotations=annotations)
    settings = folder / "project.toml"
    settings.write_text(settings.read_text() + SETTINGS)
    project.network()
    return project
