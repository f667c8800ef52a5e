"""Least squares of any kind: generalised straight fits and non-linear fits with covariance; no physics."""
