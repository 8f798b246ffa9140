"""The public face: a project directory as a Python object, with the same words as the commands."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pandas as pd

from workbench.errors import InputError
from workbench.network import read_graphml
from workbench.prepare import explain_lines
from workbench.store import (
    FileFault,
    ProjectPaths,
    check_all,
    check_file,
    find_project,
    read_block,
    read_table,
    settle,
)
from workbench.workflow import plan
from workbench.workflow.entry import blocks as workflow_blocks
from workbench.workflow.entry.blocks import Tell, no_words
from workbench.workflow.entry.checking import stored_findings
from workbench.workflow.entry.create import DEFAULT_TEMPLATE, create_project
from workbench.workflow.entry.preparing import account_of
from workbench.workflow.entry.removing import remove_block
from workbench.workflow.entry.samples import SheetAccount, SheetDelivery, add_samples
from workbench.workflow.faults_aside import aside_lines, state_for_analysis, state_for_block
from workbench.workflow.followup.comparing import Comparison, run_compare
from workbench.workflow.followup.knowledge import add_knowledge, pathways_stages
from workbench.workflow.network.showing import Story, keep_figures, show
from workbench.workflow.reporting import SILENT, Reporter
from workbench.workflow.stages import Outcome, Standing, run_stages, standings
from workbench.workflow.state import ProjectState, load_state
from workbench.workflow.status import Status, status_of
from workbench.workflow.supervised.applying import apply_analysis
from workbench.workflow.tables import measured_block, plain_table

if TYPE_CHECKING:
    import networkx as nx
    from anndata import AnnData


class Blocks(Mapping[str, "AnnData"]):
    """Measured blocks by name; each is read when it is asked for, its file checked against its hash."""

    def __init__(self, project: Project) -> None:
        self._project = project

    def __getitem__(self, name: str) -> AnnData:
        state = self._project.state()
        state.require_block(name)
        return measured_block(state, name)

    def __iter__(self) -> Iterator[str]:
        return iter(self._project.state().settings.blocks)

    def __len__(self) -> int:
        return len(self._project.state().settings.blocks)


@dataclass(frozen=True)
class Result:
    """What an analysis wrote, read from its files; each is checked against its hash first."""

    root: Path
    analysis: str

    @property
    def edges(self) -> pd.DataFrame:
        """Return edges.tsv."""
        return self._table("edges.tsv")

    @property
    def group_pairs(self) -> pd.DataFrame:
        """Return group_pairs.tsv."""
        return self._table("group_pairs.tsv")

    @property
    def features(self) -> pd.DataFrame:
        """Return features.tsv."""
        return self._table("features.tsv")

    @property
    def components(self) -> pd.DataFrame:
        """Return components.tsv."""
        return self._table("components.tsv")

    @property
    def explained(self) -> pd.DataFrame:
        """Return explained.tsv."""
        return self._table("explained.tsv")

    @property
    def association(self) -> pd.DataFrame:
        """Return association.tsv: what the canonical components go with in the sample sheet."""
        return self._table("association.tsv")

    @property
    def performance(self) -> pd.DataFrame:
        """Return performance.tsv (multi-block PLS): double cross-validation beside what it is compared with."""
        return self._table("performance.tsv")

    @property
    def panel(self) -> pd.DataFrame:
        """Return panel.tsv (multi-block PLS): the smallest set of features, and what could stand in for each."""
        return self._table("panel.tsv")

    @property
    def predictions(self) -> pd.DataFrame:
        """Return predictions.tsv (multi-block PLS): each sample by models that had not seen it."""
        return self._table("predictions.tsv")

    def predict(self, other: str | Path) -> pd.DataFrame | None:
        """Return the predictions for another project's samples by the frozen preparation and model; nothing is written.

        None for an analysis that has no outcome.
        """
        return apply_analysis(ProjectPaths(self.root), self.analysis, Path(other), write=False).predictions

    @property
    def private(self) -> pd.DataFrame:
        """Return private.tsv: what was removed from each block before its pairs were tested."""
        return self._table("private.tsv")

    @property
    def differential(self) -> pd.DataFrame:
        """Return differential.tsv: pairs whose correlation differs between groups."""
        return self._table("differential.tsv")

    @property
    def followup(self) -> pd.DataFrame:
        """Return followup.tsv: the short list, best evidence first."""
        return self._table("followup.tsv")

    @property
    def pathways(self) -> pd.DataFrame:
        """Return pathways.tsv (where the settings name a table of sets)."""
        return self._table("pathways.tsv")

    @property
    def record(self) -> dict[str, Any]:
        """Return record.json."""
        loaded: dict[str, Any] = json.loads(self._path("record.json").read_text("utf-8"))
        return loaded

    @property
    def graph(self) -> nx.Graph:
        """Return the network."""
        return read_graphml(self._path("network.graphml"))

    def _table(self, file: str) -> pd.DataFrame:
        return read_table(self._path(file))

    def _path(self, file: str) -> Path:
        relative = f"results/{self.analysis}/{file}"
        path = self.root / relative
        if not path.exists():
            raise InputError(
                f"{path}: not there (yet); run the analysis with `workbench run {self.analysis}`"
            )
        check_file(self.root, relative)
        return path


@dataclass(frozen=True)
class Project:
    """One study: a directory with ``project.toml`` at its root.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     project = Project.create(Path(folder) / "study", title="Barley under drought")
    ...     project.status().next_command
    'workbench add-samples FILE --group COLUMN --adjust COLUMN'
    """

    paths: ProjectPaths

    @classmethod
    def open(cls, path: str | Path) -> Project:
        """Return the project in a folder or above it; what a killed command left is finished or dropped."""
        paths = find_project(Path(path))
        settle(paths.root)
        return cls(paths)

    @classmethod
    def create(cls, path: str | Path, *, template: str = DEFAULT_TEMPLATE, title: str = "") -> Project:
        """Make a project in a new or empty folder."""
        return cls(create_project(Path(path), template=template, title=title))

    def state(self) -> ProjectState:
        """Return settings, sample sheet and manifest as they stand now."""
        return load_state(self.paths)

    @property
    def blocks(self) -> Blocks:
        """Return the measured blocks by name."""
        return Blocks(self)

    def add_samples(
        self,
        file: str | Path,
        *,
        id: str | None = None,
        group: Sequence[str] = (),
        adjust: Sequence[str] = (),
        subject: str | None = None,
        time: str | None = None,
        replace: bool = False,
        tell: Tell = no_words,
    ) -> SheetAccount:
        """Import the sample sheet; ``tell`` hears what a replaced one changes."""
        delivery = SheetDelivery(
            Path(file), id, _names(group), _names(adjust), subject=subject, time=time, replace=replace
        )
        return add_samples(self.paths, delivery, tell)

    def add_block(
        self,
        name: str,
        file: str | Path,
        *,
        layer: str,
        values: str,
        own_layer: bool = False,
        samples_in: str | None = None,
        annotations: str | Path | None = None,
        runs: str | Path | None = None,
        sheet: str | None = None,
        array: str | None = None,
        decimal: str | None = None,
        adjust: Sequence[str] = (),
        accept_names: bool = False,
        replace: bool = False,
        tell: Tell = no_words,
    ) -> tuple[str, ...]:
        """Bring a delivered table in as a block; return what was understood of it."""
        delivery = workflow_blocks.Delivery(
            name=name,
            file=Path(file),
            layer=layer,
            values=values,
            own_layer=own_layer,
            samples_in=samples_in,
            annotations=None if annotations is None else Path(annotations),
            runs=None if runs is None else Path(runs),
            sheet=sheet,
            array=array,
            decimal=decimal,
            adjust=_names(adjust),
            accept_names=accept_names,
            replace=replace,
        )
        return workflow_blocks.add_block(self.paths, delivery, tell)

    def remove_block(self, name: str) -> tuple[str, ...]:
        """Take a block out of the project; its source stays. Return the folders of results that rested on it."""
        return remove_block(self.paths, name)

    def export(self, block: str, *, values: str = "prepared", tell: Tell = no_words) -> pd.DataFrame:
        """Return one block as a plain table, samples in rows: ``prepared`` or ``measured`` values.

        ``tell`` hears faults of settings that do not concern it and are set aside.
        """
        state, aside = state_for_block(self.paths, block)
        state.require_block(block)
        if values not in ("prepared", "measured"):
            raise InputError(f"no values '{values}'; allowed: prepared, measured")
        tell(aside_lines(aside))
        if values == "measured":
            return plain_table(measured_block(state, block))
        stages = plan.block_stages(state, [block])
        if not aside or any(one.reason is not None for one in standings(state, stages)):
            self.prepare(block)
        return plain_table(read_block(check_file(self.paths.root, f"prepared/{block}.h5ad")))

    def prepare(self, *blocks: str, reporter: Reporter = SILENT) -> Outcome:
        """Run the recipes of the named blocks, or of all."""
        return run_stages(self.paths, "prepare", lambda state: plan.block_stages(state, blocks), reporter)

    def explain(self, block: str) -> tuple[str, ...]:
        """Return a block's recipe step by step: what it did, why, its numbers, how to change it."""
        self.prepare(block)
        return explain_lines(account_of(self.state(), block), block)

    def look(self, *blocks: str, reporter: Reporter = SILENT) -> Outcome:
        """Look at the named blocks, or at all of them and between them."""
        return run_stages(self.paths, "look", lambda state: plan.look_stages(state, blocks), reporter)

    def reading(self, block: str | None = None) -> tuple[str, ...]:
        """Return what the look at a block says in words; without a block, how far the blocks agree."""
        relative = "results/look/reading.txt" if block is None else f"results/look/{block}/reading.txt"
        return tuple(check_file(self.paths.root, relative).read_text("utf-8").splitlines())

    def integrate(self, *analyses: str, reporter: Reporter = SILENT) -> Outcome:
        """Run the engine for the named analyses, or for all."""
        return run_stages(
            self.paths, "integrate", lambda state: plan.integrate_stages(state, analyses), reporter
        )

    def network(self, *analyses: str, reporter: Reporter = SILENT) -> Outcome:
        """Build the networks of the named analyses, or of all."""
        return run_stages(self.paths, "network", lambda state: plan.network_stages(state, analyses), reporter)

    def run(self, *analyses: str, reporter: Reporter = SILENT) -> Outcome:
        """Run every stage that is out of date, in order."""
        return run_stages(self.paths, "run", lambda state: plan.all_stages(state, analyses), reporter)

    def ready_analyses(self) -> list[str]:
        """Return the analyses whose blocks are of two layers at least."""
        return plan.analyses_that_can_run(self.state())

    def plan(self, *analyses: str) -> list[Standing]:
        """Return the standing of the stages that ``run`` would look at."""
        state = self.state()
        return standings(state, plan.all_stages(state, analyses))

    def status(self, *analyses: str) -> Status:
        """Return what is done, what is stale, and the next command (about some analyses, where they are named)."""
        return status_of(self.state(), analyses)

    def check(self, *, reporter: Reporter = SILENT) -> list[dict[str, Any]]:
        """Return the findings about the data, each with ``accepted`` (the reason, or None)."""
        run_stages(self.paths, "check", plan.check_stages, reporter)
        return stored_findings(self.state())

    def check_files(self) -> list[FileFault]:
        """Return the stored files that are not what the program wrote."""
        return check_all(self.paths.root)

    def show(self, *features: str, analysis: str | None = None, tell: Tell = no_words) -> list[Story]:
        """Return the evidence for one feature, or for the cross-layer pairs among several.

        ``tell`` hears faults of settings that do not concern it and are set aside.
        """
        state, aside = state_for_analysis(self.paths, analysis)
        tell(aside_lines(aside))
        return show(state, state.one_analysis(analysis), features)

    def keep_figures(
        self, stories: Sequence[Story], *, analysis: str | None = None, file: str | Path | None = None
    ) -> tuple[Path, ...]:
        """Write the scatters of pairs, by default below the analysis' results; return their files."""
        state, _ = state_for_analysis(self.paths, analysis)
        return keep_figures(
            state.root, state.one_analysis(analysis), stories, None if file is None else Path(file)
        )

    def pathways(
        self,
        *analyses: str,
        sets: str | Path | None = None,
        links: str | Path | None = None,
        reporter: Reporter = SILENT,
    ) -> Outcome:
        """Follow the networks of the named analyses, or of all; tables of sets and links that are given are kept."""
        if sets is not None or links is not None:
            given = [None if path is None else Path(path) for path in (sets, links)]
            add_knowledge(self.paths, analyses, *given)
        return run_stages(self.paths, "pathways", lambda state: pathways_stages(state, analyses), reporter)

    def compare(self, first: str, second: str, *, by: str | None = None) -> Comparison:
        """Compare two analyses, of this project or of others (``FOLDER:ANALYSIS``); tables go to results/compare."""
        return run_compare(self.paths, (first, second), by)[0]

    def result(self, analysis: str) -> Result:
        """Return what an analysis wrote."""
        self.state().require_analysis(analysis)
        return Result(self.paths.root, analysis)


def _names(value: Sequence[str]) -> tuple[str, ...]:
    """Return one name or several as a tuple."""
    return (value,) if isinstance(value, str) else tuple(value)
