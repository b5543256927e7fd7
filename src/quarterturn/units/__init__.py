"""Units: names, sizes and conversions, the system of a cell, and what a number counts."""
