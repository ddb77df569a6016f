"""Estimators on arrays, one file each; every one returns a `Fit`."""
