"""From a network to what is known: sets of features, known links, over-representation, coherence."""

from workbench.pathways.coherence import Coherence, permutation_p, permutations_allowed, rewiring_p
from workbench.pathways.edge_columns import edge_columns, edge_ends, known_evidence
from workbench.pathways.links import KnownLinks, read_links
from workbench.pathways.matching import (
    ColumnChoice,
    SetMembers,
    alternatives,
    identifier_columns,
    match_column,
    match_sets,
)
from workbench.pathways.over_representation import LayerTest, hypergeometric_p, layer_tests, stouffer
from workbench.pathways.rewiring import rewired
from workbench.pathways.sample_permutation import (
    PermutedCounts,
    community_score,
    permuted_counts,
    residual_space,
    unit_columns,
)
from workbench.pathways.sets import FeatureSet, SetTable, read_sets
from workbench.pathways.short_list import Candidate, GroupCorrelation, short_list

__all__ = [
    "Candidate",
    "Coherence",
    "ColumnChoice",
    "FeatureSet",
    "GroupCorrelation",
    "KnownLinks",
    "LayerTest",
    "PermutedCounts",
    "SetMembers",
    "SetTable",
    "alternatives",
    "community_score",
    "edge_columns",
    "edge_ends",
    "hypergeometric_p",
    "identifier_columns",
    "known_evidence",
    "layer_tests",
    "match_column",
    "match_sets",
    "permutation_p",
    "permutations_allowed",
    "permuted_counts",
    "read_links",
    "read_sets",
    "residual_space",
    "rewired",
    "rewiring_p",
    "short_list",
    "stouffer",
    "unit_columns",
]
