"""Correlation of all pairs of features across layers, and the evidence for those that pass."""
