"""The README's examples, run as they stand there."""

import json
import re
import shutil
import subprocess
from collections.abc import Iterator
from pathlib import Path

import httpx
import pytest

from service.cli import main
from tests.service.running import KEY, running_server

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text()
EXAMPLES = dict(re.findall(r"<!-- example: (\w+) -->\n```sh\n(.*?)```", README, re.DOTALL))


@pytest.fixture(scope="module")
def server(tmp_path_factory) -> Iterator[httpx.Client]:
    with running_server(tmp_path_factory.mktemp("server"), computing=True) as client:
        yield client


def run(server: httpx.Client, key_file: Path, *names: str) -> list[str]:
    """Standard output of the examples, one line per answer."""
    key_file.write_text(KEY)
    script = "".join(EXAMPLES[name] for name in names)
    script = script.replace("http://127.0.0.1:8000", str(server.base_url).rstrip("/"))
    script = script.replace("sojourn-data/admin.key", str(key_file)).replace("curl ", "curl --fail -w '\\n' ")
    done = subprocess.run(["bash", "-euc", script], capture_output=True, text=True, check=False, timeout=120)
    assert done.returncode == 0, done.stdout + done.stderr
    return [line for line in done.stdout.splitlines() if line]


@pytest.mark.skipif(shutil.which("curl") is None, reason="the examples are written with curl")
def test_examples_post_a_zone_and_a_track_and_read_its_row(server, tmp_path):
    zone, receipt = map(json.loads, run(server, tmp_path / "key", "setup", "zones", "tracks"))
    assert zone["zone"] == "quiet-bay"
    assert (receipt["accepted"], receipt["rejected"]) == (3, 0)
    rows, header, row, summary, submissions, status = run(server, tmp_path / "key", "setup", "rows")
    (answer,) = json.loads(rows)["rows"]
    assert (answer["month"], answer["tracked_hours"], answer["coverage"]) == ("2025-03", 12.0, 1.0)
    assert 0.4 < answer["probability_mass"] < 0.9
    assert row.split(",")[header.split(",").index("animal")] == "seal-7"
    assert json.loads(summary)["rows"][0]["animals_tracked"] == 1
    assert [each["kind"] for each in json.loads(submissions)["submissions"]] == ["zone", "tracks"]
    assert json.loads(status)["current"]


def test_estimate_example_uses_files_that_are_there(tmp_path, monkeypatch):
    (arguments,) = re.findall(r"^\.venv/bin/sojourn (estimate .*) --out answer$", README, re.MULTILINE)
    monkeypatch.chdir(ROOT)
    assert main([*arguments.split(), "--out", str(tmp_path)]) == 0
    assert json.loads((tmp_path / "zone_use.json").read_bytes())["rows"]
