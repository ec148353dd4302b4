"""Results drawn: the same names as in `analysis`, result -> chart."""
