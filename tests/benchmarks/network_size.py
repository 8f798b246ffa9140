"""Time and size of every step behind the screen for a large network.

``python tests/benchmarks/network_size.py [EDGES]`` builds a network of that many edges (default 20,000) between 5,000
transcripts and 600 metabolites and measures what is done with it; ``python tests/benchmarks/network_size.py study``
does the same for a study on disk of 100 samples whose four modules give 20,000 edges, and follows and compares it.

Seen (one busy core of two, numpy 2.4, networkx 3.6), seconds of processor for 20,000 edges: build 1.3, communities 0.5,
backbone 0.1, layout 0.2, stability of communities 8 (20 resamples), summary 0.1, GraphML out 1.8 (20 MiB), in 2.2, GEXF
out 2.1, picture 0.6. The study: network stage 11, stage behind it 21 (400 sets, 999 rewirings 10, 400 permutations of
the samples 8), comparison of two such studies 2.7. 200,000 edges: build 12, GraphML out 20 (167 MiB), GEXF out 22
(219 MiB).
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from network.networks import ATTRIBUTES, random_tables

from workbench.figures import figure_files
from workbench.figures.network import draw_network
from workbench.network import (
    backbone_p,
    build_network,
    communities,
    community_stability,
    gexf_bytes,
    graphml_bytes,
    network_summary,
    read_graphml,
    with_layout,
    with_stability,
)

SAMPLES, TRANSCRIPTS, METABOLITES, MODULES = 100, 5000, 600, 4
IN_MODULE = {"rna": 300, "lcms": 25}


def timed(name: str, work: Callable[[], Any]) -> Any:
    """Return what ``work`` returns, and print the processor time that it took."""
    start, wall = time.process_time(), time.perf_counter()
    result = work()
    used, passed = time.process_time() - start, time.perf_counter() - wall
    print(f"{name:<22} {used:6.2f} s of processor, {passed:6.2f} s of clock", flush=True)
    return result


def network(edges: int) -> None:
    """Measure each step on edges with 18 numbers and texts each."""
    tables = random_tables(edges, TRANSCRIPTS, METABOLITES)
    graph = timed("build", lambda: build_network(*tables, attributes=ATTRIBUTES, seed=1))
    timed("communities", lambda: communities(graph, 1))
    timed("backbone", lambda: backbone_p(graph))
    found = timed("stability", lambda: community_stability(graph, resamples=100, seed=1))
    graph = timed("layout", lambda: with_layout(with_stability(graph, found)))
    timed("summary", lambda: network_summary(graph))
    data = timed("GraphML out", lambda: graphml_bytes(graph))
    print(f"{len(data) / 2**20:.1f} MiB, {graph.number_of_nodes()} nodes, {graph.number_of_edges()} edges")
    print(f"{found.resamples} resamples for the stability")
    timed("GEXF out", lambda: gexf_bytes(graph))
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "network.graphml"
        path.write_bytes(data)
        timed("GraphML in", lambda: read_graphml(path))
    timed("figure", lambda: list(figure_files(draw_network(graph))))


def tables_of_study(seed: int) -> dict[str, pd.DataFrame]:
    """Return two tables in which four modules follow a factor each."""
    random = np.random.default_rng(seed)
    factors = random.normal(size=(SAMPLES, MODULES))
    samples = [f"{seed}S{number:03d}" for number in range(SAMPLES)]
    made = {}
    for name, letter, size in (("rna", "g", TRANSCRIPTS), ("lcms", "m", METABOLITES)):
        values = random.normal(size=(SAMPLES, size))
        inside = MODULES * IN_MODULE[name]
        values[:, :inside] += np.repeat(factors, IN_MODULE[name], axis=1)
        columns = [f"{letter}{number:04d}" for number in range(size)]
        made[name] = pd.DataFrame(values, index=pd.Index(samples, name="sample"), columns=columns)
    return made


def study(folder: Path, seed: int) -> Any:
    """Return a project of 20,000 edges, with 400 sets, four of them its modules."""
    from workbench import Project

    made = tables_of_study(seed)
    sheet, sets = folder / f"samples{seed}.tsv", folder / "sets.tsv"
    pd.DataFrame({"sample": made["rna"].index}).to_csv(sheet, sep="\t", index=False)
    project = Project.create(folder / f"study{seed}", title="a large study")
    project.add_samples(sheet)
    random, rows = np.random.default_rng(0), []
    for name, layer in (("rna", "transcripts"), ("lcms", "metabolites")):
        file, columns = folder / f"{name}{seed}.tsv", made[name].columns
        made[name].round(5).to_csv(file, sep="\t")
        project.add_block(name, file, layer=layer, values="continuous")
        for number in range(400):
            start = number * IN_MODULE[name]
            inside = list(columns[start : start + IN_MODULE[name]]) if number < MODULES else []
            held = [*inside, *random.choice(columns, len(columns) // 100, replace=False)]
            rows += [(f"S{number}", f"set {number}", feature) for feature in held]
    pd.DataFrame(rows, columns=["set", "name", "feature"]).to_csv(sets, sep="\t", index=False)
    settings = project.paths.settings
    quick = (
        "permutations = 20\nrepeats = 1\n\n[analyses.main.network]\nstability = 0\nremove_private = false\n"
    )
    settings.write_text(settings.read_text() + quick)
    project.network()
    return project, sets


def followed() -> None:
    """Measure the stage behind the network and the comparison of two such studies."""
    from workbench.workflow.followup.comparing import run_compare
    from workbench.workflow.followup.knowledge import add_knowledge, pathways_stages
    from workbench.workflow.reporting import Reporter
    from workbench.workflow.stages import run_stages

    class Clock(Reporter):
        def say(self, text: str) -> None:
            print(f"{time.perf_counter() - start:7.2f} s  {text}", flush=True)

    with tempfile.TemporaryDirectory() as name:
        made = [timed(f"study {seed}", lambda seed=seed: study(Path(name), seed)) for seed in (1, 2)]
        project, sets = made[0]
        print(f"{len(project.result('main').edges)} edges")
        add_knowledge(project.paths, (), sets, None)
        start = time.perf_counter()
        timed("pathways", lambda: run_stages(project.paths, "pathways", pathways_stages, Clock()))
        words = str(made[0][0].paths.root), str(made[1][0].paths.root)
        found, _ = timed("compare", lambda: run_compare(None, words, None))
        print("\n".join(found.sentences()))


if __name__ == "__main__":
    if sys.argv[1:] == ["study"]:
        followed()
    else:
        network(*(map(int, sys.argv[1:2] or ["20000"])))
