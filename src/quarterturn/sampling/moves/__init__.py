"""Markov moves, one a file; each leaves exp(-S) invariant."""
