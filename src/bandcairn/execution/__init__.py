"""Carrying the plan out: where nodes, recordings, steps and store meet."""
