"""Markov chains: moves, integrators, tuning, the driver loop."""
