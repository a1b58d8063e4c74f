"""The README's promises: its commands exist, its code runs, its tables agree with the program."""

import re
import shlex
import tomllib
from pathlib import Path

import pytest
from astropy.table import QTable

import starcount
from starcount import stars, steps
from starcount.cli import COMMANDS
from starcount.galaxy.read import PUBLISHED
from starcount.survey.group_settings import GROUP

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


def test_the_table_of_bands_is_the_programs():
    """Every system with its bands, zero point and reference band, in the program's order, and no other."""
    rows = re.findall(r"^\| [^|]+ \| (`[^|]+`) \| (Vega|AB) \| (V|G) \|$", README, re.MULTILINE)
    listed = [(name, zero, band) for names, zero, band in rows for name in re.findall(r"`([^`]+)`", names)]
    assert listed == [(band.name, band.magnitudes, band.reference) for band in stars.BANDS.values()]


@pytest.fixture
def readme_survey(tmp_path, monkeypatch):
    """The README's survey as ``fields/mine``, with its keys of colour and the tables that they name."""
    monkeypatch.chdir(tmp_path)
    folder = tmp_path / "fields" / "mine"
    folder.mkdir(parents=True)
    settings = re.sub(r"^(counts|extra) = .*\n", "", block("survey"), flags=re.MULTILINE) + block("colour keys")
    (folder / "survey.toml").write_text(settings)
    (folder / "fields.ecsv").write_text(block("fields"))
    curve = {"m": [8.0, 24.0], "completeness": [1.0, 0.5]}
    error = {"m": [8.0, 24.0], "offset": [0.0, 0.0], "scatter": [0.01, 0.3]}
    for name, columns in (("completeness", curve), ("colour-error", error)):
        table = QTable(columns)
        for column in set(columns) - {"completeness"}:
            table[column].unit = "mag"
        table.write(folder / f"{name}.ecsv", format="ascii.ecsv")
    return folder


def test_the_survey_of_the_readme_is_in_order(readme_survey):
    """Its settings and fields, with the keys of colour added, pass the check: 16 bins of magnitude, 5 of colour."""
    (group,) = steps.check(readme_survey)["groups"]
    assert (group["name"], group["fields"], group["bins"]) == ("pole", 2, 80)
    assert set(tomllib.loads(block("colour keys"))) <= set(GROUP)


def test_the_commands_about_populations_and_classes_run(readme_survey, capsys):
    """As printed, on the README's own survey."""
    lines = re.findall(r"^starcount ((?:population|predict fields/mine --classes).*)$", README, re.MULTILINE)
    assert len(lines) == 2
    for line in lines:
        assert starcount.cli.main(shlex.split(line)) == 0
    assert "horizontal branch" in capsys.readouterr().out


def test_the_settings_of_an_own_population_are_read_as_printed():
    """The block is TOML with the keys that the program knows of isochrones."""
    (text,) = re.findall(r"```toml\n(format = 1\nname = \"my old disc\".*?)```", README, re.DOTALL)
    settings = tomllib.loads(text)
    known = {"format", "name", "kind", "table", "sources", "imf", "star_formation", "metallicity", "phases", "columns"}
    assert set(settings) == known


def test_the_example_in_colour_runs(capsys):
    """As printed; the stars of the table are those of its parts, to the rounding of what is printed."""
    exec(compile(block("colour"), "README.md", "exec"), {})
    said = capsys.readouterr().out
    assert all(f"\n{part} " in said for part in ("thin", "thick", "halo"))
    assert re.search(r"^red giants of the halo: \d+\.\d$", said, re.MULTILINE)


def test_named_galaxies_exist():
    """The published Galaxies that the cautions compare come with the program."""
    for name in re.findall(r"`((?:juric|chang)-\d+|default)`", README):
        assert (PUBLISHED / f"{name}.toml").is_file()


@pytest.mark.slow
def test_the_python_example_runs(tmp_path, monkeypatch, capsys):
    """The ten lines do the whole job on the demo survey, as printed."""
    (tmp_path / "fields").symlink_to(ROOT / "fields")
    monkeypatch.chdir(tmp_path)
    exec(compile(block("python"), "README.md", "exec"), {})
    assert "thin" in capsys.readouterr().out
