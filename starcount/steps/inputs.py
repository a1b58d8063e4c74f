"""What a step is given: surveys and Galaxies, read with our names of bands and populations, and kept with the run."""

import tomllib
from pathlib import Path

import tomli_w

from starcount import galaxy as galaxies
from starcount import survey as surveys
from starcount.files import write_bytes, write_text
from starcount.galaxy import Galaxy, published_names
from starcount.galaxy.read import PUBLISHED, is_file_name
from starcount.stars import BANDS, POPULATIONS, TRACERS_ABSENT
from starcount.stars.bands import ABSENT
from starcount.stars.own_file import settings_of
from starcount.survey import Survey, write_survey

SURVEY = Path("inputs") / "survey"
GALAXY = Path("inputs") / "galaxy.toml"
OWN = "populations"
"""Beside the Galaxy: a folder for each component that has a population of the user's own."""
TRUTH = "truth.toml"


def read_survey(path: str | Path) -> Survey:
    """The survey of a folder or of its survey.toml, every band of which is one of ours."""
    return surveys.read_survey(path, bands=BANDS, absent=ABSENT)


def read_galaxy(name_or_path: str | Path) -> Galaxy:
    """A Galaxy, every population of which is one of ours or a file that is there."""
    return galaxies.read_galaxy(name_or_path, populations=("census", *POPULATIONS), absent=TRACERS_ABSENT)


def survey_folder(survey: str | Path) -> Path:
    """The folder of a survey that was given by folder or by its survey.toml."""
    path = Path(survey)
    return path.parent if path.suffix == ".toml" else path


def short_name(survey: str | Path) -> str:
    """The name of a survey's folder, for the names of runs."""
    return survey_folder(survey).resolve().name


def population_files(path: Path) -> list[Path]:
    """The files of a population of the user's own: its settings, where it has them, and its table."""
    return [path] if path.suffix == ".ecsv" else [path, path.parent / settings_of(path)["table"]]


def galaxy_files(given: str | Path, galaxy: Galaxy) -> list[Path]:
    """The user's files behind a Galaxy: its own, and those of its populations."""
    populations = [file for path in _own(galaxy).values() for file in population_files(path)]
    return [*([] if str(given) in published_names() else [Path(given)]), *dict.fromkeys(populations)]


def keep_inputs(part: Path, survey: Survey, given: str | Path, galaxy: Galaxy, galaxy_given: str | Path) -> list[Path]:
    """Copy the survey (with its truth, where one lies beside it) and the Galaxy with its populations into a run.

    Returns the files that were given, for the record.
    """
    write_survey(survey, part / SURVEY)
    truth = survey_folder(given) / TRUTH
    if truth.is_file():
        write_bytes(part / SURVEY / TRUTH, truth.read_bytes())
    _keep_galaxy(part / GALAXY, galaxy, galaxy_given)
    return [survey_folder(given), *galaxy_files(galaxy_given, galaxy)]


def _keep_galaxy(final: Path, galaxy: Galaxy, given: str | Path) -> None:
    """Copy a Galaxy byte by byte, or, where it names files, with the places of their copies in their stead."""
    source = PUBLISHED / f"{given}.toml" if str(given) in published_names() else Path(given)
    own = _own(galaxy)
    if not own:
        write_bytes(final, source.read_bytes())
        return
    text = tomllib.loads(source.read_text(encoding="utf-8"))
    for block in text["component"]:
        if block["name"] in own:
            copy = _keep_population(final.parent / OWN / block["name"], own[block["name"]])
            block["population"] = copy.relative_to(final.parent).as_posix()
    write_text(final, tomli_w.dumps(text))


def _keep_population(folder: Path, path: Path) -> Path:
    """Copy a population's files into one folder; return where its first file is now."""
    files = population_files(path)
    for file in files:
        write_bytes(folder / file.name, file.read_bytes())
    settings = settings_of(path) if path.suffix == ".toml" else {}
    if "table" in settings and settings["table"] != files[1].name:
        write_text(folder / path.name, tomli_w.dumps({**settings, "table": files[1].name}))
    return folder / path.name


def _own(galaxy: Galaxy) -> dict[str, Path]:
    """The files of the user's own populations by component."""
    return {c.name: Path(c.population) for c in galaxy.components if is_file_name(c.population)}
