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


def serve(settings: Settings) -> int:
    """Serve until stopped.

    Returns
    -------
    int, exit status: 0 stopped, 2 the store was refused
    """
    try:
        store = Store.open(settings)
    except StoreError as fault:
        print(fault, file=sys.stderr)
        return REFUSED
    keyed = settings.with_admin_key()
    if settings.admin_key is None:
        print(f"The admin key is in {settings.data / ADMIN_KEY_FILE}.", file=sys.stderr)
    reconciler = Reconciler(store, keyed)
    reconciler.start()
    # Once it has shut down, uvicorn raises the signal that told it to: this must not skip what follows.
    signal.signal(signal.SIGTERM, _leave)
    try:
        uvicorn.run(create_app(store, keyed, reconciler), host=keyed.host, port=keyed.port, log_level="info")
    finally:
        reconciler.stop()
        store.close()
    return STOPPED


def _leave(_number: int, _frame: FrameType | None) -> NoReturn:
    raise SystemExit(STOPPED)
