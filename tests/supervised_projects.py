"""Small projects with a class and a number planted in two layers, for tests of the supervised analysis."""

from __future__ import annotations

from contextlib import nullcontext
from pathlib import Path
from unittest import mock

import numpy as np
import pandas as pd

from workbench import Project
from workbench.workflow import plan
from workbench.workflow.reporting import Reporter
from workbench.workflow.stages import run_stages
from workbench.workflow.supervised.supervised import supervised_stage

GENES, COMPOUNDS = 120, 40


class Told(Reporter):
    """Listener that keeps the sentences."""

    def __init__(self) -> None:
        self.lines: list[str] = []

    def say(self, text: str) -> None:
        self.lines.append(text.strip())


def cohort(
    folder: Path,
    seed: int,
    n: int = 40,
    *,
    shift: float = 0.7,
    genes: int = GENES,
    lost: int = 0,
    raised: int = 1,
    sheet: dict[str, object] | None = None,
    group: str | None = "status",
    adjust: tuple[str, ...] = ("age",),
    subject: str | None = None,
    extra: dict[str, dict[str, int]] | None = None,
    settings: str = 'method = "multiblock_pls"\noutcome = "status"',
) -> Project:
    """Return a project of one cohort.

    The first 12 genes and 5 compounds are raised by ``shift`` (natural logarithm) in ill samples, the next 15 and
    8 share a factor. The first ``lost`` genes are not measured, every second one has ``raised`` times the
    counts; ``extra`` genes have a mean count for each status.
    """
    features, rng = np.random.default_rng(99), np.random.default_rng(seed)
    folder.mkdir(parents=True, exist_ok=True)
    samples = [f"{folder.name}{k:02d}" for k in range(n)]
    ill, factor = rng.permutation(np.arange(n) % 2), rng.normal(size=n)
    columns = {
        "status": np.where(ill, "well", "ill"),
        "age": rng.normal(50, 9, n).round(1),
        "reading": (2.0 * ill + rng.normal(size=n)).round(3),
        "dose": rng.integers(1, 4, n),
    }
    frame = pd.DataFrame(columns | (sheet or {}), index=pd.Index(samples, name="sample"))
    shown = (frame["status"] == "well").to_numpy(dtype=float)
    logs = features.normal(4.5, 1.0, genes) + rng.normal(0, 0.4, (n, genes))
    logs[:, :12] += shift * shown[:, None]
    logs[:, ::2] += np.log(raised)
    logs[:, 12:27] += 0.5 * factor[:, None]
    counts = pd.DataFrame(rng.poisson(np.exp(logs)), index=samples, columns=[f"g{k}" for k in range(genes)])
    for name, means in (extra or {}).items():
        counts[name] = rng.poisson(frame["status"].map(means))
    peaks = features.normal(10.0, 1.0, COMPOUNDS) + rng.normal(0, 0.4, (n, COMPOUNDS))
    peaks[:, :5] += shift * shown[:, None]
    peaks[:, 5:13] += 0.5 * factor[:, None]
    peaks[rng.random(peaks.shape) < 0.03] = np.nan
    intensities = pd.DataFrame(np.exp(peaks), index=samples, columns=[f"m{k}" for k in range(COMPOUNDS)])
    frame.to_csv(folder / "samples.tsv", sep="\t")
    counts.iloc[:, lost:].T.rename_axis("feature").to_csv(folder / "rna.tsv", sep="\t")
    intensities.rename_axis("sample").to_csv(folder / "lcms.csv")
    project = Project.create(folder / "study", title="A cohort")
    project.add_samples(folder / "samples.tsv", group=group or (), adjust=adjust, subject=subject)
    project.add_block("rna", folder / "rna.tsv", layer="transcripts", values="counts")
    project.add_block("lcms", folder / "lcms.csv", layer="metabolites", values="intensities")
    set_analysis(project, settings)
    return project


def set_analysis(project: Project, lines: str) -> None:
    """Put lines into ``[analyses.main]``, in place of those that an earlier call put there."""
    text = project.paths.settings.read_text()
    before, mark, after = text.partition("[analyses.main]\n")
    rest = after.partition("# end\n")[2] if "# end\n" in after else after
    quick = "repeats = 1\npermutations = 39\n"
    project.paths.settings.write_text(f"{before}{mark}{lines}\n{quick}# end\n{rest}")


def integrate(project: Project, *, figures: bool = False) -> list[str]:
    """Run the supervised stage with what it needs, without drawing unless asked; return the sentences it says."""
    told, pages = Told(), "workbench.figures.supervised_pages.draw_supervised"
    with nullcontext() if figures else mock.patch(pages, return_value=()):
        run_stages(
            project.paths,
            "integrate",
            lambda state: [*plan.block_stages(state), supervised_stage(state, "main")],
            told,
        )
    return told.lines


def table(project: Project, name: str) -> pd.DataFrame:
    """Return a table of the analysis."""
    return pd.read_csv(project.paths.analysis("main") / f"{name}.tsv", sep="\t")
