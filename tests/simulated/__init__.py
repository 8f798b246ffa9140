"""Simulated studies whose truth is known, and the yardsticks to hold a result against it."""

from .design import Block, Design, clinical, metabolites, microbes, proteins, transcripts
from .sheet import design_matrix
from .study import Study, Truth, simulate
from .yardsticks import Score, by_hand, correlations, logs, oracle, score

__all__ = [
    "Block",
    "Design",
    "Score",
    "Study",
    "Truth",
    "by_hand",
    "clinical",
    "correlations",
    "design_matrix",
    "logs",
    "metabolites",
    "microbes",
    "oracle",
    "proteins",
    "score",
    "simulate",
    "transcripts",
]
