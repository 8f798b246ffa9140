"""From edges to a network: communities and their stability, backbone, a summary in words, GraphML and GEXF."""

from workbench.network.backbone import BACKBONE_LEVEL, backbone_p
from workbench.network.builder import (
    CAUTIONS,
    build_network,
    rated_network,
    with_communities,
    with_degrees,
    with_stability,
)
from workbench.network.communities import communities
from workbench.network.gexf import gexf_bytes
from workbench.network.graphml import GraphmlExport, export_graphml, graphml_bytes, read_graphml
from workbench.network.keys import Key
from workbench.network.layout import layout, with_layout
from workbench.network.stability import CommunityStability, community_stability
from workbench.network.summary import NetworkSummary, network_summary, shown_name, summarise
from workbench.network.xml_text import legal_text, restore_text

__all__ = [
    "BACKBONE_LEVEL",
    "CAUTIONS",
    "CommunityStability",
    "GraphmlExport",
    "Key",
    "NetworkSummary",
    "backbone_p",
    "build_network",
    "communities",
    "community_stability",
    "export_graphml",
    "gexf_bytes",
    "graphml_bytes",
    "layout",
    "legal_text",
    "network_summary",
    "rated_network",
    "read_graphml",
    "restore_text",
    "shown_name",
    "summarise",
    "with_communities",
    "with_degrees",
    "with_layout",
    "with_stability",
]
