"""HTTP service around the estimators: readers, store, recompute, writers, routes and the command line."""
