"""What follows from a network: known edges, pathways, comparisons."""
