"""The calls a person makes."""
