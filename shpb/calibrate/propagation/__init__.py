"""Complex propagation coefficient of bars that are not elastic, from two passages."""
