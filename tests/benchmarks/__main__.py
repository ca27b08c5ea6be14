"""Run the benchmarks and print their table; name files to run only those: ``python -m tests.benchmarks ingest``."""

import importlib
import os
import platform
import sys

ALL = ("zone_mass_kernel", "ingest", "recompute", "demo")


def main() -> int:
    """Print the table in Markdown."""
    print(f"{platform.machine()}, {os.cpu_count()} cores, Python {platform.python_version()}\n")
    print("| what | measured | wanted |\n|---|---|---|", flush=True)
    for name in sys.argv[1:] or ALL:
        for row in importlib.import_module(f"tests.benchmarks.{name}").rows():
            print(f"| {row.what} | {row.figure} | {row.wanted} |", flush=True)
    return 0


if __name__ == "__main__":
    sys.exit(main())
