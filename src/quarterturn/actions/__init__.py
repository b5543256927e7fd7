"""Statements -> Action -> EuclideanAction: the canonical expression, the turn, the findings."""
