"""Sampling of fields on space: trajectories, flips, warm-up and the driver."""
