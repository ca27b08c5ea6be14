"""Tests of both packages; ``python -m tests`` checks format, lint, types and behaviour."""
