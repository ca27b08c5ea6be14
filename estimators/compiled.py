"""The decorators of compiled kernels.

Numba keeps machine code by the time stamp of the file of one function, and would go on using it after a constant or
a kernel in another file has changed. So the code is kept in a folder named after the content of all sources here.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from functools import partial
from pathlib import Path

from numba import config, njit


def folder_of_these_sources(package: Path, below: Path) -> Path:
    """Folder for the machine code of a package's sources as they are now.

    Parameters
    ----------
    package : Path, folder of the sources
    below : Path, folder that it lies in
    """
    content = hashlib.sha256(b"\0".join(path.read_bytes() for path in sorted(package.glob("*.py"))))
    return below / f"kernels-{content.hexdigest()[:16]}"


def _choices(package: Path, chosen: str) -> Iterator[Path]:
    """The operator's choice (NUMBA_CACHE_DIR) or, without one, beside the sources, then the user's cache."""
    if chosen:
        yield Path(chosen)
        return
    yield package / "__pycache__"
    try:
        yield Path.home() / ".cache" / "sojourn"
    except RuntimeError:
        return


def usable_folder(package: Path, chosen: str) -> str:
    """The first folder of `_choices` that can be written; empty where none can, and nothing is kept."""
    for choice in _choices(package, chosen):
        folder = folder_of_these_sources(package, choice)
        try:
            folder.mkdir(parents=True, exist_ok=True)
            probe = folder / "writable"
            probe.touch()
        except OSError:
            continue
        return str(folder)
    return ""


config.CACHE_DIR = usable_folder(Path(__file__).parent, config.CACHE_DIR)  # type: ignore[attr-defined]
_KEPT = bool(config.CACHE_DIR)  # type: ignore[attr-defined]

compiled = partial(njit, cache=_KEPT, error_model="numpy")
"""Compile a function; a division by zero gives infinity instead of an exception."""

compiled_contracted = partial(njit, cache=_KEPT, error_model="numpy", fastmath={"contract"})
"""The same, with products and sums contracted; not for tests of left and right, which must agree to the last bit."""
