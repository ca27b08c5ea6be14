"""The demo, run as a user runs it: the real server as a process of its own, fed over HTTP."""

import re
import signal
import subprocess
import sys
import urllib.error
import urllib.request

import pytest

from service.demo import DemoError, monthly_table, run_demo

ROW = {
    "animal": "pony-04", "month": "2024-05", "zone_version": 2, "tracked_hours": 744.0, "coverage": 0.5,
    "probability_mass": 0.25, "time_fraction": 0.75, "bounds": [0.125, 0.625], "visits": 3,
}  # fmt: skip


def sojourn(*arguments: str) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "service", *arguments]
    return subprocess.run(command, capture_output=True, text=True, check=False, timeout=300)


@pytest.fixture(scope="module")
def demo(tmp_path_factory) -> tuple[subprocess.CompletedProcess[str], str]:
    data = tmp_path_factory.mktemp("demo")
    done = sojourn("demo", "--once", "--data", str(data))
    return done, done.stdout


def test_demo_once_ends_well(demo):
    done, _ = demo
    assert done.returncode == 0, done.stderr
    assert "Posting the scenario" in done.stderr
    assert "Computing zone use" in done.stderr


def test_demo_prints_both_versions_of_the_zone_whose_boundary_changed(demo):
    rows = re.findall(r"^(\S+) +(\d{4}-\d\d) +(\d) +[\d.]+ +[\d.]+ +[\d.]+ +[\d.]+ +[\d.]+ to [\d.]+$", demo[1], re.M)
    versions = {month: version for animal, month, version in rows if animal == "pony-04"}
    assert versions["2024-04"] == "1"
    assert versions["2024-05"] == "2"
    assert len(versions) == 14


def test_demo_shows_the_failed_collar_as_months_without_a_row(demo):
    months = set(re.findall(r"^pony-05 +(\d{4}-\d\d) ", demo[1], re.M))
    assert {"2024-03", "2024-07"} <= months
    assert not {"2024-04", "2024-05", "2024-06"} & months


def test_demo_tells_of_corrected_and_rejected_fixes_and_where_to_read_on(demo):
    counts = re.search(r"Fixes: ([\d,]+) accepted, 0 unchanged, ([\d,]+) corrected, 2 rejected", demo[1])
    assert counts
    assert int(counts[2]) > 100
    assert "admin.key" in demo[1]
    assert "/zone-use/summary" in demo[1]
    assert "With --once the server ends here" in demo[1]


def test_demo_leaves_no_server_behind(demo):
    address = re.search(r"(http://127\.0\.0\.1:\d+)/status", demo[1])[1]
    with pytest.raises(urllib.error.URLError):
        urllib.request.urlopen(f"{address}/health", timeout=2)


def test_demo_on_the_same_data_changes_nothing_and_serves_until_interrupted(demo):
    data = re.search(r"The key is in (\S+)/admin\.key", demo[1])[1]
    command = [sys.executable, "-u", "-m", "service", "demo", "--data", data]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True) as process:
        said = []
        for line in process.stdout:
            said.append(line)
            if "Serving until Ctrl-C" in line:
                process.send_signal(signal.SIGINT)
        assert process.wait(timeout=60) == 0
    assert "Fixes: 0 accepted," in "".join(said)


def test_demo_says_why_when_the_server_cannot_start(tmp_path, capsys):
    (tmp_path / "sojourn.db").mkdir()
    assert run_demo(tmp_path, None, once=True) == 1
    assert "The server did not start" in capsys.readouterr().err


def test_table_names_what_is_not_known():
    unknown = ROW | {
        "probability_mass": None,
        "time_fraction": None,
        "coverage": 0.0,
        "bounds": [0.0, 1.0],
        "visits": 0,
    }
    line = monthly_table([unknown]).splitlines()[3]
    assert " ".join(line.split()) == "pony-04 2024-05 2 744.0 0.000 not known not known 0.000 to 1.000"


def test_table_counts_the_rows_that_round_to_nothing():
    nothing = ROW | {"probability_mass": 0.0, "time_fraction": 0.0, "bounds": [0.0, 0.0001], "visits": 0}
    table = monthly_table([ROW, nothing])
    assert "0.125 to 0.625" in table
    assert "In 1 more rows" in table


def test_client_error_is_told(tmp_path):
    from service.demo import Client

    (tmp_path / "key").write_text("key\n")
    with pytest.raises(DemoError, match="cannot be reached"):
        Client("http://127.0.0.1:9", tmp_path / "key").call("GET", "/status")
