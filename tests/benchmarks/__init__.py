"""Benchmarks: ``python -m tests.benchmarks`` prints one table; every ratio comes from one run, each figure a median."""
