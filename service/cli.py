"""The command line: `sojourn serve`, `sojourn demo`, `sojourn estimate`."""

from __future__ import annotations

import argparse
import os
import signal
import sys
from collections.abc import Sequence
from pathlib import Path

from service.problems import Problem
from service.settings import Settings, SettingsError

REFUSED = 2
INTERRUPTED = 130


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="sojourn", description="Monthly use of management zones by tracked animals, with what is not known."
    )
    commands = parser.add_subparsers(dest="command", required=True, metavar="serve | demo | estimate")

    serve = commands.add_parser("serve", help="run the HTTP service; settings come from SOJOURN_ variables")
    serve.add_argument("--host", help="address to listen on (SOJOURN_HOST)")
    serve.add_argument("--port", type=int, help="port to listen on (SOJOURN_PORT)")
    serve.add_argument("--data", metavar="DIR", help="data directory (SOJOURN_DATA)")

    demo = commands.add_parser("demo", help="run the service on an invented scenario and show what it answers")
    demo.add_argument("--once", action="store_true", help="end after the table instead of serving on")
    demo.add_argument("--port", type=int, help="port to listen on (default: a free one)")
    demo.add_argument("--data", type=Path, metavar="DIR", help="data directory (default: a temporary one)")

    estimate = commands.add_parser("estimate", help="compute zone use from files, without a server")
    estimate.add_argument("tracks", type=Path, metavar="TRACKS", help="fixes, CSV or JSON")
    estimate.add_argument("zones", type=Path, metavar="ZONES", help="zones, GeoJSON")
    estimate.add_argument("--out", type=Path, required=True, metavar="DIR", help="directory for the answer")
    return parser


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Returns
    -------
    int, exit status: 0 done, 2 refused, 130 interrupted; `estimate` has 3 for some rows refused
    """
    asked = _parser().parse_args(arguments)
    try:
        return _COMMANDS[asked.command](asked)
    except SettingsError as fault:
        print(fault, file=sys.stderr)
    except Problem as fault:
        print(f"{fault.title}: {fault.detail}", file=sys.stderr)
    except KeyboardInterrupt:
        print("\nStopped.", file=sys.stderr)
        return INTERRUPTED
    return REFUSED


# Each command imports what it needs only when it is called: --help must not wait for server and database.
def _serve(asked: argparse.Namespace) -> int:
    from service.server import serve  # noqa: PLC0415

    given = {"SOJOURN_HOST": asked.host, "SOJOURN_PORT": asked.port, "SOJOURN_DATA": asked.data}
    overrides = {name: str(value) for name, value in given.items() if value is not None}
    return serve(Settings.from_environment({**os.environ, **overrides}))


def _demo(asked: argparse.Namespace) -> int:
    from service.demo import run_demo  # noqa: PLC0415

    return run_demo(asked.data, asked.port, once=asked.once)


def _estimate(asked: argparse.Namespace) -> int:
    from service.estimate_files import estimate_files  # noqa: PLC0415

    # Ended in either way, its temporary store, which holds the positions, is removed.
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    return estimate_files(asked.tracks, asked.zones, asked.out, Settings.from_environment(os.environ))


_COMMANDS = {"serve": _serve, "demo": _demo, "estimate": _estimate}
