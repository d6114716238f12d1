"""The layers of the program, checked on the installed package."""

from importlinter.cli import lint_imports


def test_imports_point_one_way_and_each_library_has_one_home():
    assert lint_imports(config_filename="pyproject.toml") == 0
