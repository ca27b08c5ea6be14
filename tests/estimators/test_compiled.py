"""Where compiled kernels are kept."""

from estimators.compiled import _folder_of_this_source


def test_folder_changes_with_any_source(tmp_path):
    """A constant in another file is compiled into a kernel, so every file counts."""
    (tmp_path / "kernel.py").write_text("from defaults import REACH\n")
    (tmp_path / "defaults.py").write_text("REACH = 6.0\n")
    before = _folder_of_this_source(tmp_path, "")
    assert _folder_of_this_source(tmp_path, "") == before
    (tmp_path / "defaults.py").write_text("REACH = 6.5\n")
    assert _folder_of_this_source(tmp_path, "") != before


def test_the_operators_folder_is_used(tmp_path):
    (tmp_path / "kernel.py").write_text("")
    chosen = _folder_of_this_source(tmp_path, "/somewhere/else")
    assert chosen.startswith("/somewhere/else/kernels-")
