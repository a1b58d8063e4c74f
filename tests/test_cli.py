"""The command line: quick help, exit status, errors in words, JSON alone on standard output."""

import json
import subprocess
import sys
import time
from pathlib import Path

import click
import pytest

from starcount import cli, steps
from starcount.cli import COMMANDS, main, screen
from starcount.errors import FailedChecks, InputError, Problem, Problems

DEMO = Path(__file__).parents[1] / "fields" / "demo"
HEAVY = {"numpy", "scipy", "astropy", "numba", "pymc", "pytensor", "matplotlib", "xarray", "pyarrow", "pydantic"}


def imported_by(*command: str) -> tuple[set[str], int]:
    """Top-level packages imported by a command in a fresh interpreter, and its exit status."""
    done = subprocess.run([sys.executable, "-X", "importtime", *command], capture_output=True, text=True)
    names = {line.rsplit("|", 1)[1].strip().split(".")[0] for line in done.stderr.splitlines() if "|" in line}
    return names, done.returncode


@pytest.mark.parametrize("arguments", [["--help"], ["--version"], *[[name, "--help"] for name in COMMANDS]])
def test_help_imports_nothing_heavy(arguments):
    """Help answers at once because it imports no library the work needs."""
    names, status = imported_by("-m", "starcount", *arguments)
    assert status == 0
    assert not names & HEAVY


def test_help_is_quick():
    """Help takes well under 0.2 s; the best of five, since the machine may be busy."""
    took = []
    for _ in range(5):
        start = time.perf_counter()
        subprocess.run([sys.executable, "-m", "starcount", "--help"], check=True, capture_output=True)
        took.append(time.perf_counter() - start)
    assert min(took) < 0.2


def test_every_command_has_its_summary_as_help():
    """The static summary and the first line of the command's own help say the same."""
    for name, summary in COMMANDS.items():
        command = cli.starcount.get_command(None, name)
        assert command.name == name
        assert " ".join(command.help.split("\n\n")[0].split()) == summary


def test_every_option_is_explained():
    """No option of any command is without help."""
    for name in COMMANDS:
        for parameter in cli.starcount.get_command(None, name).params:
            assert isinstance(parameter, click.Argument) or parameter.help


def test_every_command_is_a_step():
    """Commands and steps go by the same names."""
    assert all(callable(getattr(steps, name)) for name in COMMANDS)


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["fti"], "no command called 'fti'; did you mean 'fit'?"),
        (["xyzzy"], "no command called 'xyzzy'; known: check, count"),
        (["check"], "Missing argument 'SURVEY'"),
        (["laws", "--jsn"], "No such option"),
        (["count", "here", "there", "--column", "ra"], "--column 'ra'; expected KEY=COLUMN"),
    ],
)
def test_wrong_usage_is_status_2_and_says_what_would_work(arguments, said, capsys):
    """Usage errors are lines with our prefix on standard error."""
    assert main(arguments) == 2
    printed = capsys.readouterr()
    assert printed.out == ""
    assert any(line.startswith("starcount: ") and said in line for line in printed.err.splitlines())


def raising(problem: BaseException):
    def step(*_args, **_options):
        raise problem

    return step


@pytest.mark.parametrize(
    ("problem", "status", "lines"),
    [
        (InputError("no such thing"), 2, ["no such thing"]),
        (
            Problems(Problem("a.ecsv", "row 3, b", "91.0", "-90 to 90"), Problem("a.ecsv", "area", "0", "> 0")),
            2,
            ["a.ecsv: row 3, b: 91.0; expected -90 to 90", "a.ecsv: area: 0; expected > 0"],
        ),
        (FailedChecks("r-hat 1.2"), 6, ["r-hat 1.2"]),
        (KeyboardInterrupt(), 130, ["interrupted"]),
    ],
)
def test_problems_are_lines_and_a_status(problem, status, lines, monkeypatch, capsys):
    """What a user can act on is one prefixed line each, without a traceback; with --json it is also one object."""
    monkeypatch.setattr(steps, "check", raising(problem))
    assert main(["check", "anything"]) == status
    printed = capsys.readouterr()
    assert printed.out == ""
    assert printed.err.split("\n")[-len(lines) - 1 : -1] == [f"starcount: {line}" for line in lines]

    assert main(["check", "anything", "--json"]) == status
    assert json.loads(capsys.readouterr().out) == {"exit_status": status, "problems": lines}


def test_a_bug_keeps_its_traceback(monkeypatch):
    """What is not the user's doing is not dressed up as an error of theirs."""
    monkeypatch.setattr(steps, "check", raising(ZeroDivisionError("ours")))
    with pytest.raises(ZeroDivisionError):
        main(["check", "anything"])


def test_a_survey_that_is_not_there(tmp_path, capsys):
    """A missing survey is one line with its path, status 2."""
    assert main(["check", str(tmp_path / "nowhere")]) == 2
    printed = capsys.readouterr().err.splitlines()
    assert len(printed) == 1
    assert "nowhere" in printed[0]


def test_laws_lists_units_and_sources(capsys):
    """Every law and every published Galaxy is listed, in lines and as JSON."""
    assert main(["laws"]) == 0
    text = capsys.readouterr().out
    assert main(["laws", "--json"]) == 0
    record = json.loads(capsys.readouterr().out)
    assert len(record["galaxies"]) >= 2
    for law in record["laws"]:
        assert law["name"] in text
        assert law["reference"] in text


def test_plain_progress_waits_and_then_estimates(capsys):
    """Short work says nothing; long work names each new thing, then a line every ten seconds, with the time left."""
    now = iter([0.0, 1.0, 3.0, 4.0, 14.0, 15.0])
    tell = screen._plain(lambda: next(now))
    for what, share in [("reading", 0.1), ("reading", 0.2), ("reading", 0.3), ("reading", 0.4), ("writing", 0.5)]:
        tell(what, share)
    assert capsys.readouterr().err.splitlines() == [
        "reading: 20 % of all, about 12 s left",
        "reading: 40 % of all, about 21 s left",
        "writing: 50 % of all, about 15 s left",
    ]


@pytest.mark.parametrize("command", ["predict", "check", "laws"])
def test_only_fits_import_pymc(command, tmp_path):
    """PyMC takes seconds to import: predicting and checking do without."""
    arguments = [] if command == "laws" else [DEMO]
    run = "import sys; from starcount.cli import main; status = main(sys.argv[1:])"
    script = f"{run}; print(sorted(sys.modules)); sys.exit(status)"
    done = subprocess.run(
        [sys.executable, "-c", script, command, *map(str, arguments)], cwd=tmp_path, capture_output=True, text=True
    )
    assert done.returncode == 0, done.stderr
    loaded = done.stdout.splitlines()[-1]
    assert "'starcount.steps'" in loaded
    assert "'pymc'" not in loaded
    assert "'pytensor'" not in loaded
