"""Levels and the lattice's own answer: the road that does not sample."""
