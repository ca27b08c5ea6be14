"""A server as a process: refused, stopped, killed and started again."""

import os
import signal
import socket
import subprocess
import sys

import pytest

from tests.running_server import CSV, RunningServer

ZONE = {
    "type": "Feature",
    "properties": {},
    "geometry": {
        "type": "Polygon",
        "coordinates": [[[-0.05, -0.05], [0.05, -0.05], [0.05, 0.05], [-0.05, 0.05], [-0.05, -0.05]]],
    },
}


@pytest.fixture
def start(tmp_path):
    started = []

    def begin():
        started.append(RunningServer(tmp_path / "data").__enter__())
        return started[-1]

    yield begin
    for server in started:
        server.kill()
        server.http.close()


def _end(server, number):
    server.process.send_signal(number)
    return server.process.wait(timeout=30)


def _csv(animal, fixes):
    rows = [f"{animal},2024-01-{1 + k // 24:02d}T{k % 24:02d}:00:00Z,{k / 5000:.4f},0.01,20" for k in range(fixes)]
    return "\n".join(["animal,time,lon,lat,sd_m", *rows]).encode()


def _post(server, body):
    return server.http.post("/tracks", content=body, headers=CSV).raise_for_status().json()


def _refused(data, port="0"):
    """A server that is to be refused: its exit status, and what it says."""
    command = [sys.executable, "-m", "service", "serve", "--data", str(data), "--port", port]
    ended = subprocess.run(command, env=os.environ, capture_output=True, text=True, check=False, timeout=60)
    return ended.returncode, ended.stderr


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_server_stops_cleanly(start, number):
    """Told to stop it ends with status 0 and leaves the data to the next."""
    assert _end(start(), number) == 0
    assert _end(start(), number) == 0


def test_killed_server_goes_on_after_a_restart(start):
    """Killed while it takes submissions and computes, it has every acknowledged one, and computes what was left."""
    server = start()
    server.http.put("/zones/reserve", json=ZONE).raise_for_status()
    acknowledged = [_post(server, _csv(f"animal-{k}", 600))["submission"] for k in range(6)]
    assert _end(server, signal.SIGKILL) == -signal.SIGKILL

    server = start()
    kept = [receipt["submission"] for receipt in server.http.get("/submissions").json()["submissions"]]
    assert set(acknowledged) <= set(kept)
    answer = server.http.get("/zone-use", headers={"Prefer": "wait=60"}).json()
    assert answer["current"]
    assert [row["animal"] for row in answer["rows"]] == [f"animal-{k}" for k in range(6)]
    assert {row["fixes"] for row in answer["rows"]} == {600}


def test_second_server_is_refused_with_the_reason(start, tmp_path):
    """A server on data that another one has ends with status 2 and says why."""
    start()
    status, said = _refused(tmp_path / "data")
    assert status == 2
    assert "Another server is using the data directory" in said


def test_taken_port_is_refused_with_what_to_do(tmp_path):
    """A server whose port another program has ends with status 2 and names the settings."""
    with socket.create_server(("127.0.0.1", 0)) as other:
        status, said = _refused(tmp_path / "data", str(other.getsockname()[1]))
    assert status == 2
    assert "Set SOJOURN_HOST or SOJOURN_PORT to another." in said
    assert "Traceback" not in said


def test_file_that_is_no_database_is_refused_with_the_reason(tmp_path):
    """A database file of another kind is named and left as it is."""
    (tmp_path / "sojourn.db").write_text("no database" * 200)
    status, said = _refused(tmp_path)
    assert status == 2
    assert said.startswith(f"The database {tmp_path / 'sojourn.db'} cannot be used: file is not a database.")
    assert (tmp_path / "sojourn.db").read_text() == "no database" * 200


@pytest.mark.parametrize("content", [b"", b"short", b"\xb9" * 20], ids=["empty", "short", "not text"])
def test_key_file_without_a_key_is_refused_with_what_to_do(tmp_path, content):
    """A server that nobody could use does not start."""
    (tmp_path / "admin.key").write_bytes(content)
    status, said = _refused(tmp_path)
    assert status == 2
    assert said.startswith(f"The key in {tmp_path / 'admin.key'} cannot be used: it holds no key")


def test_stalled_upload_does_not_keep_the_server_from_stopping(start):
    """A client that stops sending is cut off; nothing of its body is stored."""
    server = start()
    address = server.http.base_url
    head = ("POST /tracks HTTP/1.1", "Host: x", f"Authorization: {server.http.headers['Authorization']}")
    with socket.create_connection((address.host, address.port)) as client:
        client.sendall("\r\n".join((*head, "Content-Type: text/csv", "Content-Length: 99", "", "animal,")).encode())
        server.http.get("/status").raise_for_status()
        assert _end(server, signal.SIGTERM) == 0
    assert start().http.get("/submissions").json()["submissions"] == []
