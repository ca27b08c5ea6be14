"""The command line: refusals in plain words, and a help that does not wait for what it does not need."""

import subprocess
import sys

import pytest

from service.cli import main
from service.settings import Settings
from service.store.database import Store


def test_help_loads_neither_the_web_server_nor_the_database():
    program = (
        "import sys, service.cli\n"
        "try:\n    service.cli.main(['--help'])\nexcept SystemExit:\n    pass\n"
        "print(sorted({'fastapi', 'uvicorn', 'sqlalchemy'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert "serve" in done.stdout
    assert done.stdout.splitlines()[-1] == "[]"


def test_an_unknown_command_is_refused(capsys):
    with pytest.raises(SystemExit) as ended:
        main(["guess"])
    assert ended.value.code == 2
    assert "guess" in capsys.readouterr().err


@pytest.mark.parametrize("port", ["99999", "-1"])
def test_a_port_that_is_none_is_refused_by_name(port, capsys):
    assert main(["serve", f"--port={port}"]) == 2
    assert "SOJOURN_PORT" in capsys.readouterr().err


def test_a_data_directory_in_use_is_refused(tmp_path, capsys):
    store = Store.open(Settings(data=tmp_path))
    try:
        assert main(["serve", "--data", str(tmp_path), "--port", "0"]) == 2
    finally:
        store.close()
    assert "Another server" in capsys.readouterr().err
