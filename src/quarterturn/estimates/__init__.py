"""Values with errors: the Gamma method, derived quantities, correlators, fits."""
