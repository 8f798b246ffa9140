"""Seconds for a network of 20,000 edges: build, communities, GraphML out, GraphML in.

Run ``python tests/benchmarks/network_size.py [EDGES]``.
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from network.networks import ATTRIBUTES, random_tables

from workbench.network import build_network, communities, graphml_bytes, network_summary, read_graphml


def timed(name: str, work: Callable[[], Any]) -> Any:
    """Return what ``work`` returns, and print the processor time that it took."""
    start, wall = time.process_time(), time.perf_counter()
    result = work()
    used, passed = time.process_time() - start, time.perf_counter() - wall
    print(f"{name:<12} {used:6.2f} s of processor, {passed:6.2f} s of clock")
    return result


def main(edges: int = 20_000) -> None:
    """Measure each step on edges between 5,000 transcripts and 600 metabolites, 18 numbers and texts each."""
    tables = random_tables(edges, 5000, 600)
    graph = timed("build", lambda: build_network(*tables, attributes=ATTRIBUTES, seed=1))
    timed("communities", lambda: communities(graph, 1))
    timed("summary", lambda: network_summary(graph))
    data = timed("GraphML out", lambda: graphml_bytes(graph))
    print(f"{len(data) / 2**20:.1f} MiB, {graph.number_of_nodes()} nodes, {graph.number_of_edges()} edges")
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "network.graphml"
        path.write_bytes(data)
        timed("GraphML in", lambda: read_graphml(path))


if __name__ == "__main__":
    main(*map(int, sys.argv[1:2]))
