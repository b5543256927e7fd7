"""Symplectic integrators, one a file."""
