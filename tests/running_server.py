"""A real server in a process of its own, for tests and benchmarks that go through HTTP."""

import os
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import httpx

KEY = "a-key-for-tests-only"
CSV = {"content-type": "text/csv"}
GEOJSON = {"content-type": "application/geo+json"}


def free_port() -> int:
    """A port that nothing listens on."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


class RunningServer:
    """`sojourn serve` on a data directory; ``with`` starts it and stops it.

    Attributes
    ----------
    http : httpx.Client, speaks to the server with the admin key
    process : subprocess.Popen
    """

    def __init__(self, data: Path, **settings: str) -> None:
        self.port = free_port()
        self._environment = {
            **os.environ,
            "SOJOURN_DATA": str(data),
            "SOJOURN_PORT": str(self.port),
            "SOJOURN_ADMIN_KEY": KEY,
            **{f"SOJOURN_{name.upper()}": value for name, value in settings.items()},
        }
        self._log_file = data.parent / f"server-{self.port}.log"
        self.http = self.client(self.port)

    @staticmethod
    def client(port: int) -> httpx.Client:
        """A client of its own, for another thread."""
        return httpx.Client(
            base_url=f"http://127.0.0.1:{port}", headers={"authorization": f"Bearer {KEY}"}, timeout=600.0
        )

    def __enter__(self) -> "RunningServer":
        with self._log_file.open("wb") as log:
            self.process = subprocess.Popen(
                [sys.executable, "-m", "service", "serve"],
                env=self._environment,
                cwd=Path(__file__).parent.parent,
                stdout=log,
                stderr=subprocess.STDOUT,
            )
        self._wait_until_up()
        return self

    def __exit__(self, kind: type[BaseException] | None, fault: BaseException | None, trace: object) -> None:
        self.http.close()
        if self.process.poll() is None:
            self.process.terminate()
        self.process.wait(timeout=60)

    def _wait_until_up(self, seconds: float = 60.0) -> None:
        deadline = time.monotonic() + seconds
        while time.monotonic() < deadline:
            if self.process.poll() is not None:
                break
            try:
                if self.http.get("/health").status_code == 200:
                    return
            except httpx.TransportError:
                time.sleep(0.02)
        raise RuntimeError(f"the server did not start:\n{self._log_file.read_text()}")

    def kill(self) -> None:
        """End the server as a power cut would."""
        self.process.send_signal(signal.SIGKILL)
        self.process.wait(timeout=60)

    def wait_until_current(self, seconds: float = 600.0) -> None:
        """Return when everything acknowledged so far is published."""
        deadline = time.monotonic() + seconds
        while time.monotonic() < deadline:
            status = self.http.get("/status").raise_for_status().json()
            if status["current"]:
                return
            time.sleep(0.02)
        raise RuntimeError(f"not current after {seconds} s: {status}")

    def process_ids(self) -> list[int]:
        """The server's process and all that it started."""
        found, parents = [self.process.pid], [self.process.pid]
        children: dict[int, list[int]] = {}
        for stat in Path("/proc").glob("[0-9]*/stat"):
            try:
                fields = stat.read_text().rpartition(")")[2].split()
            except OSError:
                continue
            children.setdefault(int(fields[1]), []).append(int(stat.parent.name))
        while parents:
            below = [child for parent in parents for child in children.get(parent, [])]
            found += below
            parents = below
        return found

    def peak_memory_mb(self) -> float:
        """Sum over all processes of the most memory that each has held so far."""
        total = 0
        for process in self.process_ids():
            lines = Path(f"/proc/{process}/status").read_text().splitlines()
            total += sum(int(line.split()[1]) for line in lines if line.startswith("VmHWM"))
        return total / 1024.0
