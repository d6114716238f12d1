"""What a person can use or meet is documented: commands, options, exit codes, outcomes."""

import re
from pathlib import Path

import click
import pytest

from rhovane.cli import main
from rhovane.model import AlertState, ExitCode, Outcome

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text("utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text("utf-8")


def test_the_readme_begins_with_one_paragraph_that_states_the_job():
    title, paragraph, nxt = README.split("\n\n")[:3]
    assert title == "# rhovane"
    assert "rank correlation" in paragraph
    assert "alert" in paragraph
    assert nxt.startswith("## ")


@pytest.mark.parametrize("name", sorted(main.commands))
def test_every_command_is_in_the_readme(name: str):
    assert re.search(rf"^\| `{name}\b", README, re.MULTILINE), f"README has no row for `{name}`"


@pytest.mark.parametrize("name", sorted(main.commands))
def test_every_command_takes_config_and_every_option_has_a_help_text(name: str):
    options = [p for p in main.commands[name].params if isinstance(p, click.Option)]
    assert "--config" in {o for p in options for o in p.opts}
    assert [p.name for p in options if not p.help] == []
    assert main.commands[name].help


@pytest.mark.parametrize("code", list(ExitCode))
def test_every_exit_code_is_in_the_readme(code: ExitCode):
    assert re.search(rf"^\| {int(code)} \| \w", README, re.MULTILINE)


def test_every_outcome_and_state_is_in_the_readme():
    for outcome in Outcome:
        assert outcome.value.replace(" ", "-") in README
    for state in AlertState:
        assert state.value.split(",")[0] in README


def test_every_package_is_on_the_map():
    packages = {p.parent.name for p in (ROOT / "src" / "rhovane").glob("*/__init__.py")}
    for name in packages:
        assert re.search(rf"^  {name}/ ", DEVELOPERS, re.MULTILINE), name


def test_the_cautions_are_shown_in_the_readme():
    for words in (
        "Association is not cause",
        "does not measure exposure",
        "licensed",
        "Demo data are invented",
    ):
        assert words in README


def test_the_top_level_is_exactly_the_agreed_one():
    agreed = {"pyproject.toml", "README.md", "DEVELOPERS.md", "src", "tests", "demo_feed", "config"}
    listed = {p.name for p in ROOT.iterdir() if not p.name.startswith(".")}
    made = {"rhovane-demo", "build", "dist"}
    assert agreed <= listed
    assert listed - made == agreed
