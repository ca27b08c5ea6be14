"""Makes `python -m service` the same as `sojourn`."""

import sys

from service.cli import main

if __name__ == "__main__":
    sys.exit(main())
