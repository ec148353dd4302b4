"""Arrays in, arrays out: the numerical linear algebra of non-negative matrices."""
