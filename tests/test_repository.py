"""The tree itself: its top level, its layers, the size of its parts, and that README and Dockerfile say what is so."""

import ast
import re
import subprocess
from pathlib import Path

import pytest

from service.settings import SETTINGS

ROOT = Path(__file__).parent.parent
TOP_LEVEL = {
    "README.md", "DEVELOPERS.md", "pyproject.toml", "service", "estimators", "tests", "demo_data", "Dockerfile",
    "LICENSE",
}  # fmt: skip
MODULES = sorted(path for package in ("service", "estimators", "demo_data") for path in (ROOT / package).rglob("*.py"))
FORBIDDEN_IN_ESTIMATORS = {
    # web, and whoever brings it
    "service", "fastapi", "starlette", "pydantic", "uvicorn", "http", "urllib", "socket", "jinja2", "sqlalchemy",
    # files, environment, clock, logging
    "os", "io", "pathlib", "shutil", "tempfile", "sqlite3", "json", "csv", "sys", "time", "logging", "tqdm",
}  # fmt: skip
# Reads the package's own sources, so that compiled code of an earlier version is never used with a later one.
ALLOWED_IN_ESTIMATORS = {"compiled.py": {"pathlib"}}
BANNED_NAMES = {"utils", "helpers", "common", "core", "base", "misc", "factory"}
# But for migrations: what one does to the tables is one list.
LONGEST_FUNCTION_LINES = 40
# A table, a docstring or a compiled kernel may need a few lines more than 300; not many.
LONGEST_MODULE_LINES = 330


def tracked_paths() -> list[str]:
    if (ROOT / ".git").exists():
        listed = subprocess.run(
            ["git", "-C", str(ROOT), "ls-files", "--cached", "--others", "--exclude-standard"],
            capture_output=True, text=True, check=True,
        )  # fmt: skip
        return listed.stdout.splitlines()
    return [path.name for path in ROOT.iterdir() if path.name not in {"build"} and not path.name.endswith(".egg-info")]


def shell_block(text: str, mark: str) -> list[str]:
    """Lines of the shell block after a mark in the README."""
    found = re.search(rf"<!-- {re.escape(mark)} -->\n```sh\n(.*?)```", text, re.DOTALL)
    assert found, f"README.md has no block marked {mark!r}"
    return found[1].splitlines()


def imported(path: Path) -> set[str]:
    """Every module that a file imports, in full."""
    names: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            names.add(node.module or "")
    return names


def test_top_level_is_exactly_the_agreed_one():
    top = {path.split("/")[0] for path in tracked_paths()}
    assert {name for name in top if not name.startswith(".")} == TOP_LEVEL


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(ROOT)))
def test_functions_and_modules_are_short(path):
    text = path.read_text()
    assert len(text.splitlines()) <= LONGEST_MODULE_LINES
    too_long = []
    for node in ast.walk(ast.parse(text)):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            body = node.body[1:] if ast.get_docstring(node) is not None else node.body
            lines = (body[-1].end_lineno or 0) - body[0].lineno + 1 if body else 0
            if lines > LONGEST_FUNCTION_LINES and "migrations/versions" not in str(path):
                too_long.append(f"{node.name}: {lines} lines")
    assert not too_long


@pytest.mark.parametrize("path", sorted((ROOT / "estimators").glob("*.py")), ids=lambda path: path.name)
def test_estimators_know_no_service_web_files_clock_environment_or_logging(path):
    top = {name.split(".")[0] for name in imported(path)}
    assert not (top & FORBIDDEN_IN_ESTIMATORS) - ALLOWED_IN_ESTIMATORS.get(path.name, set())
    called = {node.id for node in ast.walk(ast.parse(path.read_text())) if isinstance(node, ast.Name)}
    assert not called & {"open", "print", "input"}
    attributes = {node.attr for node in ast.walk(ast.parse(path.read_text())) if isinstance(node, ast.Attribute)}
    assert not attributes & {"now", "utcnow", "today"}


def test_service_uses_the_estimators_through_their_public_door():
    allowed = {"estimators"}
    for path in (ROOT / "service").rglob("*.py"):
        used = {name for name in imported(path) if name.split(".")[0] == "estimators"}
        assert used <= allowed, f"{path.relative_to(ROOT)} reaches past estimators/__init__.py: {used - allowed}"


def test_recompute_is_the_one_place_that_calls_the_estimate():
    callers = {
        str(path.relative_to(ROOT / "service"))
        for path in (ROOT / "service").rglob("*.py")
        if "estimate_zone_use" in path.read_text()
    }
    assert callers == {"recompute/task.py"}


@pytest.mark.parametrize("room", ["readers", "writers", "store", "recompute"])
def test_no_room_of_the_service_imports_the_routes(room):
    for path in (ROOT / "service" / room).rglob("*.py"):
        assert not [name for name in imported(path) if name.startswith(("service.routes", "service.app"))], path


def test_no_module_has_a_name_that_collects_leftovers():
    assert not [path for path in MODULES if path.stem in BANNED_NAMES]


def test_every_setting_stands_in_the_readme_with_its_default_and_meaning():
    table = re.findall(r"^\| `SOJOURN_.*$", (ROOT / "README.md").read_text(), re.MULTILINE)
    assert table == [f"| `{setting.name}` | {setting.default} | {setting.meaning} |" for setting in SETTINGS]


def test_every_setting_named_anywhere_exists():
    known = {setting.name for setting in SETTINGS}
    for path in [*MODULES, ROOT / "README.md", ROOT / "DEVELOPERS.md", ROOT / "Dockerfile"]:
        named = set(re.findall(r"SOJOURN_[A-Z_]*[A-Z]", path.read_text()))
        assert named <= known, f"{path.name}: {named - known}"


def test_every_row_field_stands_in_the_readme_in_order():
    from service.writers.zone_use_rows import ROW_FIELDS

    section = (ROOT / "README.md").read_text().split("## What a row means")[1].split("\n## ")[0]
    told = [
        name for line in re.findall(r"^\| (`.*?) \|", section, re.MULTILINE) for name in re.findall(r"`(\w+)`", line)
    ]
    assert told == list(ROW_FIELDS)


def test_dockerfile_installs_as_the_readme_does():
    docker = (ROOT / "Dockerfile").read_text()
    install = shell_block((ROOT / "README.md").read_text(), "demo command")[:-1]
    run = [line.removeprefix("RUN ") for line in docker.splitlines() if line.startswith("RUN ")]
    assert run[-len(install) :] == install


def test_dockerfile_serves_for_all_as_nobody_with_a_volume():
    docker = (ROOT / "Dockerfile").read_text()
    lines = docker.splitlines()
    assert lines[0] == "FROM python:3.11-slim"
    assert "USER sojourn" in lines
    assert "VOLUME /data" in lines
    assert "EXPOSE 8000" in lines
    assert "SOJOURN_HOST=0.0.0.0" in docker
    assert lines.index("USER sojourn") > max(k for k, line in enumerate(lines) if line.startswith("RUN"))


def test_dockerfile_copies_what_the_installation_needs():
    copied = " ".join(re.findall(r"^COPY (.*)$", (ROOT / "Dockerfile").read_text(), re.MULTILINE)).split()
    assert {"pyproject.toml", "README.md", "LICENSE", "estimators", "service", "demo_data"} <= set(copied)


def test_ci_runs_the_readme_test_command():
    assert "test command" in (ROOT / ".ci" / "run").read_text()
    command = shell_block((ROOT / "README.md").read_text(), "test command")
    assert command[-1].endswith("python -m tests")


def test_nothing_committed_holds_a_path_of_one_machine():
    texts = [path for path in tracked_paths() if path.endswith((".md", ".py", ".toml")) or path == "Dockerfile"]
    for path in texts:
        if (ROOT / path).is_file() and path != "tests/test_repository.py":
            assert not re.search(r"/(work|opt|root|home/\w+|tmp)/", (ROOT / path).read_text()), path
