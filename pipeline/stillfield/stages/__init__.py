"""The stages of a run, one verb per module: read, prepare, estimate, aggregate, rank, write."""
