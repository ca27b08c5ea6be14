"""`sojourn demo`: the real server on an invented scenario, fed over HTTP as a data pipeline would."""

from __future__ import annotations

import http.client
import json
import os
import signal
import socket
import subprocess
import sys
import tempfile
import time
import urllib.error
import urllib.request
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path
from typing import Any

from tqdm import tqdm

HOST = "127.0.0.1"
START_SECONDS = 60.0
POLL_SECONDS = 0.1
SHOWN_ZONE = "north-fell"
LEAST_SHOWN = 0.0005
# The server is on this machine: a proxy set for the network must not come between.
_DIRECT = urllib.request.build_opener(urllib.request.ProxyHandler({}))
MEDIA_TYPES = {".csv": "text/csv", ".json": "application/json", ".geojson": "application/geo+json"}


class DemoError(Exception):
    """The demo cannot go on; the message says why."""


@dataclass(frozen=True)
class Client:
    """The demo's way to the server.

    Attributes
    ----------
    address : str, ``"http://127.0.0.1:8000"``
    key_file : Path, holds the key
    """

    address: str
    key_file: Path

    def call(self, method: str, path: str, body: bytes | None = None, media_type: str = "application/json") -> Any:
        """Answer to one request, read as JSON.

        Raises
        ------
        DemoError
            The server refused it, or cannot be reached.
        """
        headers = {"Authorization": f"Bearer {self.key_file.read_text().strip()}", "Accept": "application/json"}
        if body is not None:
            headers["Content-Type"] = media_type
        request = urllib.request.Request(self.address + path, body, headers, method=method)
        try:
            with _DIRECT.open(request, timeout=60) as response:
                return json.load(response)
        except urllib.error.HTTPError as refusal:
            text = refusal.read().decode(errors="replace")
            raise DemoError(f"{method} {path} was answered {refusal.code}: {text}") from refusal
        except (OSError, http.client.HTTPException) as fault:
            raise DemoError(f"The server at {self.address} cannot be reached: {fault}") from fault


def run_demo(data: Path | None, port: int | None, *, once: bool) -> int:
    """Run the demo.

    Parameters
    ----------
    data : Path, optional, data directory; a temporary one otherwise, removed at the end
    port : int, optional; a free one otherwise
    once : bool, end after the table

    Returns
    -------
    int, exit status
    """
    # Ended in either way, the demo ends its server too.
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    try:
        with _data_directory(data) as directory, _running_server(directory, port or _free_port()) as client:
            _post_everything(client)
            _wait_until_current(client)
            print(monthly_table(_zone_rows(client)))
            print(_where_to_read_on(client))
            if once:
                print("\nWith --once the server ends here. Run sojourn demo without it to read on.")
            else:
                _serve_on()
    except DemoError as fault:
        print(f"The demo stopped. {fault}", file=sys.stderr)
        return 1
    except KeyboardInterrupt:
        print("\nStopped.")
    return 0


@contextmanager
def _data_directory(data: Path | None) -> Iterator[Path]:
    """The given directory, made if need be; or a temporary one, removed at the end."""
    if data is not None:
        data.mkdir(parents=True, exist_ok=True)
        yield data
        return
    with tempfile.TemporaryDirectory(prefix="sojourn-demo-") as directory:
        yield Path(directory)


def _free_port() -> int:
    """A port that nothing listens on just now."""
    with socket.socket() as probe:
        probe.bind((HOST, 0))
        return int(probe.getsockname()[1])


@contextmanager
def _running_server(directory: Path, port: int) -> Iterator[Client]:
    """The real server as a process of its own, ended with the demo."""
    # Settings meant for a server of the user's own must not lead the demo's data into it.
    environment = {name: value for name, value in os.environ.items() if not name.startswith("SOJOURN_")}
    # -P: a package named service in the directory where the demo is started must not take its place.
    command = [
        sys.executable,
        "-P",
        "-m",
        "service",
        "serve",
        "--host",
        HOST,
        "--port",
        str(port),
        "--data",
        str(directory),
    ]
    log_file = directory / "demo-server.log"
    with log_file.open("wb") as log:
        process = subprocess.Popen(command, env=environment, stdout=log, stderr=subprocess.STDOUT)
    try:
        client = Client(f"http://{HOST}:{port}", directory / "admin.key")
        _wait_until_up(process, client, log_file)
        yield client
    finally:
        process.terminate()
        try:
            process.wait(timeout=30)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()


def _wait_until_up(process: subprocess.Popen[bytes], client: Client, log_file: Path) -> None:
    deadline = time.monotonic() + START_SECONDS
    while time.monotonic() < deadline:
        if process.poll() is not None:
            break
        try:
            with _DIRECT.open(f"{client.address}/health", timeout=5):
                return
        except (OSError, http.client.HTTPException):
            time.sleep(POLL_SECONDS)
    said = log_file.read_text(errors="replace")[-2000:]
    raise DemoError(f"The server did not start within {START_SECONDS:.0f} s. It said:\n{said}")


def _deliveries() -> list[tuple[str, bytes]]:
    """Name and content of the demo's files, in the order in which a pipeline would have posted them."""
    found = [each for each in files("demo_data").iterdir() if Path(each.name).suffix in MEDIA_TYPES]
    if not found:
        raise DemoError("The files of demo_data are missing. Install the project from a full checkout.")
    return [(each.name, each.read_bytes()) for each in sorted(found, key=lambda each: each.name)]


def _post_everything(client: Client) -> None:
    deliveries = _deliveries()
    counts = dict.fromkeys(("accepted", "unchanged", "corrected", "rejected"), 0)
    with tqdm(deliveries, desc="Posting the scenario", unit="file") as bar:
        for name, content in bar:
            bar.set_postfix_str(name)
            if name.endswith("-animals.json"):
                for animal, attributes in json.loads(content).items():
                    client.call("PUT", f"/animals/{animal}", json.dumps(attributes).encode())
                continue
            path = "/zones" if name.endswith(".geojson") else "/tracks"
            receipt = client.call("POST", path, content, MEDIA_TYPES[Path(name).suffix])
            if path == "/tracks":
                counts = {kind: number + receipt[kind] for kind, number in counts.items()}
    told = ", ".join(f"{number:,} {kind}" for kind, number in counts.items())
    print(f"Fixes: {told}. Rejected rows are kept with their reasons: GET /submissions.")


def _wait_until_current(client: Client) -> None:
    """Wait, with a progress bar, until everything that was sent is computed.

    Raises
    ------
    DemoError
        A computation failed.
    """
    total = len(client.call("GET", "/animals")["animals"])
    with tqdm(total=total, desc="Computing zone use", unit="animal") as bar:
        while True:
            status = client.call("GET", "/status")
            if status["failed"]:
                raise DemoError(f"A computation failed: {json.dumps(status['failed'])}")
            bar.n = max(bar.n, total - status["pending"])
            bar.refresh()
            if status["current"]:
                return
            time.sleep(POLL_SECONDS)


def _zone_rows(client: Client) -> list[dict[str, Any]]:
    rows: list[dict[str, Any]] = client.call("GET", f"/zone-use?zone={SHOWN_ZONE}&nonzero=true&limit=10000")["rows"]
    return rows


def _largest(row: dict[str, Any]) -> float:
    return max(float(row["probability_mass"]), float(row["time_fraction"]))


def _shown(value: float | None) -> str:
    return "not known" if value is None else f"{value:.3f}"


def monthly_table(rows: list[dict[str, Any]]) -> str:
    """Rows of one zone as a table for the terminal; rows that round to nothing are counted, not shown.

    Parameters
    ----------
    rows : list of dict, zone-use rows as GET /zone-use gives them
    """
    shown = [row for row in rows if row["probability_mass"] is None or _largest(row) >= LEAST_SHOWN]
    lines = [
        f"\nUse of the zone {SHOWN_ZONE}, by animal and month",
        f"{'animal':<10}{'month':<9}{'version':>7}{'tracked h':>11}{'coverage':>10}{'prob. mass':>12}"
        f"{'time fraction':>15}   {'bounds'}",
    ]
    for row in shown:
        low, high = row["bounds"]
        lines.append(
            f"{row['animal']:<10}{row['month']:<9}{row['zone_version']:>7}{row['tracked_hours']:>11.1f}"
            f"{row['coverage']:>10.3f}{_shown(row['probability_mass']):>12}{_shown(row['time_fraction']):>15}"
            f"   {low:.3f} to {high:.3f}"
        )
    lines.append(
        f"In {len(rows) - len(shown)} more rows, probability mass and time fraction are below {LEAST_SHOWN}. Bounds: "
        "what the whole month could be if every gap were outside, or inside."
    )
    return "\n".join(lines)


def _where_to_read_on(client: Client) -> str:
    return "\n".join(
        (
            "",
            f"The key is in {client.key_file}. Read the rest with it, for example:",
            f'  curl -H "Authorization: Bearer $(cat {client.key_file})" {client.address}/zone-use',
            f"  {client.address}/zone-use?zone=dateline-moor&from=2024-05   a zone across the antimeridian",
            f"  {client.address}/zone-use?animal=pony-05&f=csv              a tag that failed, as CSV",
            f"  {client.address}/zone-use/summary                           per zone and month, over animals",
            f"  {client.address}/zone-use?f=geojson                         for maps",
            f"  {client.address}/submissions                                what was posted, and what was rejected",
            f"  {client.address}/status                                     whether everything is computed",
        )
    )


def _serve_on() -> None:
    print("\nServing until Ctrl-C.")
    while True:
        time.sleep(3600)
