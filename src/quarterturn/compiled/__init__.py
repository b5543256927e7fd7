"""LatticeAction -> pure JAX functions of (path, couplings)."""
