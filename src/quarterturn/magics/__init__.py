"""IPython only: words to calls."""
