"""Decisions: need, reliability, storage, size, cost, rank and trials, as arithmetic on arrays and small records."""
