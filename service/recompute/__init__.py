"""Recomputation: the one place that calls the estimators."""
