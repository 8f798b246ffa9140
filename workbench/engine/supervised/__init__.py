"""Multi-block PLS: the fit, double cross-validation, marker panels and their performance."""
