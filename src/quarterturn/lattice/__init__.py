"""EuclideanAction -> LatticeAction: geometry, boundaries, discretisation."""
