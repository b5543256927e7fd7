"""Tables, plots and MIME bundles; knows results, not how they were made."""
