"""Ridge and generalised canonical correlation: fits, cross-validation and permutation tests."""
