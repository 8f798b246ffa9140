"""From screened pairs to edges with their evidence, and the network's files."""
