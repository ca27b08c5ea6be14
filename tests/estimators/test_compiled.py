"""Where compiled kernels are kept."""

from estimators.compiled import folder_of_these_sources, usable_folder


def test_folder_changes_with_any_source(tmp_path):
    """A constant in another file is compiled into a kernel, so every file counts."""
    (tmp_path / "kernel.py").write_text("from defaults import REACH\n")
    (tmp_path / "defaults.py").write_text("REACH = 6.0\n")
    before = folder_of_these_sources(tmp_path, tmp_path)
    assert folder_of_these_sources(tmp_path, tmp_path) == before
    (tmp_path / "defaults.py").write_text("REACH = 6.5\n")
    assert folder_of_these_sources(tmp_path, tmp_path) != before


def test_the_operators_folder_comes_first(tmp_path):
    chosen = tmp_path / "chosen"
    assert usable_folder(tmp_path, str(chosen)).startswith(str(chosen / "kernels-"))
    assert usable_folder(tmp_path, "").startswith(str(tmp_path / "__pycache__"))


def test_nothing_is_kept_where_nothing_can_be_written(tmp_path):
    (tmp_path / "in-the-way").write_text("a file, not a folder")
    assert usable_folder(tmp_path, str(tmp_path / "in-the-way")) == ""


def test_the_users_cache_comes_second(tmp_path, monkeypatch):
    package = tmp_path / "package"
    package.mkdir()
    (package / "__pycache__").write_text("a file, not a folder")
    monkeypatch.setenv("HOME", str(tmp_path / "home"))
    assert usable_folder(package, "").startswith(str(tmp_path / "home" / ".cache" / "sojourn"))
