"""A running server: the store, the reconciler and the HTTP application."""

from __future__ import annotations

import signal
import sys
from types import FrameType
from typing import NoReturn

import uvicorn

from service.app import create_app
from service.recompute.reconciler import Reconciler
from service.settings import ADMIN_KEY_FILE, Settings
from service.store.database import Store, StoreError

STOPPED = 0
REFUSED = 2
LONGEST_STOP_S = 8
"""Requests that take longer are cut off when the server is told to stop; container engines kill it after ten."""
_UVICORN_CANNOT_START = 3


def serve(settings: Settings) -> int:
    """Serve until stopped.

    Returns
    -------
    int, exit status: 0 stopped, 2 the store or the address was refused

    Raises
    ------
    SettingsError
        The key in the data directory cannot be used.
    """
    try:
        store = Store.open(settings)
    except StoreError as fault:
        print(fault, file=sys.stderr)
        return REFUSED
    try:
        return _serve(store, settings)
    finally:
        store.close()


def _serve(store: Store, settings: Settings) -> int:
    keyed = settings.with_admin_key()
    if settings.admin_key is None:
        print(f"The admin key is in {settings.data / ADMIN_KEY_FILE}.", file=sys.stderr)
    reconciler = Reconciler(store, keyed)
    # Once it has shut down, uvicorn raises the signal that told it to: this must not skip what follows.
    signal.signal(signal.SIGTERM, _leave)
    try:
        reconciler.start()
        uvicorn.run(
            create_app(store, keyed, reconciler),
            host=keyed.host,
            port=keyed.port,
            log_level="info",
            timeout_graceful_shutdown=LONGEST_STOP_S,
        )
    except SystemExit as end:
        if end.code != _UVICORN_CANNOT_START:
            raise
        print(
            f"The address {keyed.host}, port {keyed.port} cannot be listened on; the reason stands above. "
            "Set SOJOURN_HOST or SOJOURN_PORT to another.",
            file=sys.stderr,
        )
        return REFUSED
    finally:
        reconciler.stop()
    return STOPPED


def _leave(_number: int, _frame: FrameType | None) -> NoReturn:
    raise SystemExit(STOPPED)
