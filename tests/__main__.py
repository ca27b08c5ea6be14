"""Every check of the project, in order: format, lint, strict types, tests. Stops at the first that fails."""

import subprocess
import sys
from pathlib import Path

CHECKS = (
    ("format", "ruff", "format", "--check", "."),
    ("lint", "ruff", "check", "."),
    ("types", "mypy"),
    ("tests", "pytest"),
)


def main() -> int:
    """Run the checks from the top of the checkout and return the first failure's exit status."""
    for name, module, *arguments in CHECKS:
        print(f"== {name}: {module} {' '.join(arguments)}", flush=True)
        more = sys.argv[1:] if module == "pytest" else []
        command = [sys.executable, "-m", module, *arguments, *more]
        done = subprocess.run(command, check=False, cwd=Path(__file__).parent.parent)
        if done.returncode:
            print(f"== {name} failed", flush=True)
            return done.returncode
    return 0


if __name__ == "__main__":
    sys.exit(main())
