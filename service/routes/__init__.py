"""The HTTP paths: each connects readers, store and writers, and does nothing else."""
