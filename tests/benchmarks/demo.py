"""`sojourn demo --once` with nothing compiled yet."""

import os
import subprocess
import sys
import tempfile
import time

from tests.benchmarks.timing import Row


def rows() -> list[Row]:
    """All figures of this file; one run, because a second one would find the kernels compiled."""
    with tempfile.TemporaryDirectory() as directory:
        start = time.perf_counter()
        subprocess.run(
            [sys.executable, "-m", "service", "demo", "--once"],
            env={**os.environ, "NUMBA_CACHE_DIR": directory},
            check=True,
            capture_output=True,
        )
        seconds = time.perf_counter() - start
    return [Row("sojourn demo --once, nothing compiled yet", f"{seconds:.1f} s", "60 s")]
