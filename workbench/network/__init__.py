"""From edges to a network: communities, a summary in words, GraphML."""

from workbench.network.builder import CAUTIONS, build_network, with_communities, with_degrees
from workbench.network.communities import communities
from workbench.network.graphml import GraphmlExport, export_graphml, graphml_bytes, read_graphml
from workbench.network.summary import NetworkSummary, network_summary, shown_name, summarise
from workbench.network.xml_text import legal_text, restore_text

__all__ = [
    "CAUTIONS",
    "GraphmlExport",
    "NetworkSummary",
    "build_network",
    "communities",
    "export_graphml",
    "graphml_bytes",
    "legal_text",
    "network_summary",
    "read_graphml",
    "restore_text",
    "shown_name",
    "summarise",
    "with_communities",
    "with_degrees",
]
