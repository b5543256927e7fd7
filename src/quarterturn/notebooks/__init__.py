"""Demonstrations, run by the command line."""
