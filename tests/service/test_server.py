"""A server as a process: refused, stopped, killed and started again."""

import json
import signal
import socket
import subprocess
import sys
import time
import urllib.error
import urllib.request

import pytest

KEY = "a-key-for-tests"
ZONE = {
    "type": "Feature",
    "properties": {},
    "geometry": {
        "type": "Polygon",
        "coordinates": [[[-0.05, -0.05], [0.05, -0.05], [0.05, 0.05], [-0.05, 0.05], [-0.05, -0.05]]],
    },
}


class Process:
    """`sojourn serve` on a data directory, as a process of its own."""

    def __init__(self, data):
        with socket.socket() as free:
            free.bind(("127.0.0.1", 0))
            self.port = free.getsockname()[1]
        settings = {"SOJOURN_DATA": str(data), "SOJOURN_PORT": str(self.port), "SOJOURN_ADMIN_KEY": KEY}
        self.process = subprocess.Popen(
            [sys.executable, "-m", "service", "serve"], env=settings, stderr=subprocess.PIPE, stdout=subprocess.DEVNULL
        )
        self._wait()

    def _wait(self):
        for _ in range(600):
            try:
                self.ask("GET", "/health")
                return
            except urllib.error.URLError:
                assert self.process.poll() is None, self.process.stderr.read().decode()
                time.sleep(0.05)
        raise AssertionError("The server did not begin to answer.")

    def ask(self, method, path, body=None, media_type="text/csv", wait_s=0):
        headers = {"Authorization": f"Bearer {KEY}", "Content-Type": media_type, "Prefer": f"wait={wait_s}"}
        request = urllib.request.Request(f"http://127.0.0.1:{self.port}{path}", body, headers, method=method)
        with urllib.request.urlopen(request, timeout=60) as answer:
            return json.loads(answer.read())

    def end(self, number):
        self.process.send_signal(number)
        self.process.wait(30)
        self.process.stderr.close()
        return self.process.returncode


@pytest.fixture
def start(tmp_path):
    started = []

    def begin():
        started.append(Process(tmp_path / "data"))
        return started[-1]

    yield begin
    for server in started:
        if server.process.poll() is None:
            server.end(signal.SIGKILL)


def _csv(animal, fixes):
    rows = [f"{animal},2024-01-{1 + k // 24:02d}T{k % 24:02d}:00:00Z,{k / 5000:.4f},0.01,20" for k in range(fixes)]
    return "\n".join(["animal,time,lon,lat,sd_m", *rows]).encode()


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_server_stops_cleanly(start, number):
    """Told to stop it ends with status 0 and leaves the data to the next."""
    assert start().end(number) == 0
    assert start().end(number) == 0


def test_killed_server_goes_on_after_a_restart(start):
    """Killed while it takes submissions and computes, it has every acknowledged one, and computes what was left."""
    server = start()
    server.ask("PUT", "/zones/reserve", json.dumps(ZONE).encode(), "application/geo+json")
    acknowledged = [server.ask("POST", "/tracks", _csv(f"animal-{k}", 600))["submission"] for k in range(6)]
    assert server.end(signal.SIGKILL) == -signal.SIGKILL

    server = start()
    kept = [receipt["submission"] for receipt in server.ask("GET", "/submissions")["submissions"]]
    assert set(acknowledged) <= set(kept)
    answer = server.ask("GET", "/zone-use", wait_s=30)
    assert answer["current"]
    assert [row["animal"] for row in answer["rows"]] == [f"animal-{k}" for k in range(6)]
    assert {row["fixes"] for row in answer["rows"]} == {600}


def test_second_server_is_refused_with_the_reason(start, tmp_path):
    """A server on data that another one has ends with status 2 and says why."""
    start()
    settings = {"SOJOURN_DATA": str(tmp_path / "data"), "SOJOURN_PORT": "0"}
    second = subprocess.run([sys.executable, "-m", "service", "serve"], env=settings, capture_output=True, check=False)
    assert second.returncode == 2
    assert b"Another server is using the data directory" in second.stderr
