"""The README's promises: its commands exist, its code runs, its tables agree with the program."""

import re
from pathlib import Path

import pytest

import starcount
from starcount.cli import COMMANDS

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text()


def block(name: str) -> str:
    """The code block after the comment ``<!-- run: NAME -->``."""
    found = re.search(rf"^<!-- run: {name} -->\n```\w*\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)
    assert found, f"README.md has no block marked {name!r}"
    return found[1]


def test_the_two_commands_are_one_line_each():
    """A new user copies one line to install and see it, one line to test it; the check script runs the same two."""
    assert block("install") == "pip install . && starcount demo\n"
    assert block("test") == "pip install '.[test]' && python -m pytest\n"


def test_every_command_is_in_the_readme():
    """The table of commands lists each command of the program, and no other."""
    listed = re.findall(r"^\| `starcount (\w+)", README, re.MULTILINE)
    assert listed == list(COMMANDS)


def test_the_exit_statuses_are_the_programs(monkeypatch):
    """The statuses in the table are those the command line gives."""
    from starcount import cli, errors

    listed = {int(n) for n in re.findall(r"^\| (\d+) \|", README, re.MULTILINE)}
    assert listed == {0, 1, errors.InputError.exit_status, errors.FailedChecks.exit_status, cli.INTERRUPTED}


def test_every_public_name_can_be_imported():
    """Nothing in the list of public names is stale."""
    for name in starcount.__all__:
        assert getattr(starcount, name) is not None


def test_options_in_examples_exist():
    """Every option the README shows belongs to a command that exists."""
    for line in re.findall(r"^starcount (\w+ .*)$", README, re.MULTILINE):
        name, *_ = line.split()
        command = starcount.cli.starcount.get_command(None, name)
        known = {flag for parameter in command.params for flag in parameter.opts}
        assert set(re.findall(r"(--[\w-]+)", line)) <= known


@pytest.mark.slow
def test_the_python_example_runs(tmp_path, monkeypatch, capsys):
    """The ten lines do the whole job on the demo survey, as printed."""
    (tmp_path / "fields").symlink_to(ROOT / "fields")
    monkeypatch.chdir(tmp_path)
    exec(compile(block("python"), "README.md", "exec"), {})
    assert "thin" in capsys.readouterr().out
