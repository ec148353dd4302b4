"""Text <-> tree <-> sympy. Has never heard of a compartment."""
