"""The decorators of compiled kernels.

Numba keeps machine code by the time stamp of the file of one function, and would go on using it after a constant or
a kernel in another file has changed. So the code is kept in a folder named after the content of all sources here.
"""

from __future__ import annotations

import hashlib
from functools import partial
from pathlib import Path

from numba import config, njit

_PACKAGE = Path(__file__).parent


def _folder_of_this_source(package: Path, chosen: str) -> str:
    """Folder for machine code: below the operator's choice (NUMBA_CACHE_DIR) or beside the sources."""
    content = hashlib.sha256(b"\0".join(path.read_bytes() for path in sorted(package.glob("*.py"))))
    return str((Path(chosen) if chosen else package / "__pycache__") / f"kernels-{content.hexdigest()[:16]}")


config.CACHE_DIR = _folder_of_this_source(_PACKAGE, config.CACHE_DIR)  # type: ignore[attr-defined]

compiled = partial(njit, cache=True, error_model="numpy")
"""Compile a function; a division by zero gives infinity instead of an exception."""

compiled_contracted = partial(njit, cache=True, error_model="numpy", fastmath={"contract"})
"""The same, with products and sums contracted; not for tests of left and right, which must agree to the last bit."""
