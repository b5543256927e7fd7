"""Stationary paths of the Euclidean action: instantons, bounces, their fluctuations, and what they give at one loop."""
