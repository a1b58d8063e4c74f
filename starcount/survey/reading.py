"""Reading a survey: settings and tables, with everything that is wrong in one error."""

from collections.abc import Callable, Collection
from pathlib import Path

import numpy as np

from starcount.errors import Problem, Problems
from starcount.survey.count_table import read_counts
from starcount.survey.curve_tables import read_completeness, read_photometric_error, read_profiles
from starcount.survey.field_table import read_fields
from starcount.survey.groups import Group, Survey, make_group
from starcount.survey.observation import Observation
from starcount.survey.settings import TABLES, TEXT, TEXTS, edges_of, is_path, read_settings, usable
from starcount.survey.sheet import Sheet, read_sheet

SETTINGS_FILE = "survey.toml"


def read_survey(path: str | Path, bands: Collection[str] | None = None) -> Survey:
    """The survey of a ``survey.toml`` (or of the folder that holds one) with all its tables.

    Raises Problems with everything that is wrong. With ``bands`` a group in any other band is refused;
    without, the name of the band is taken as it is.
    """
    path = Path(path)
    path = path / SETTINGS_FILE if path.is_dir() else path
    settings, problems = read_settings(path, bands)
    tables = usable(settings, "group", TABLES) or []
    groups = [_group(table, path.parent, problems) for table in tables]
    if problems:
        raise Problems(*dict.fromkeys(problems))
    return Survey(settings["name"], settings.get("description", ""), settings["invented"], tuple(groups), path)


def _group(table: dict, folder: Path, problems: list[Problem]) -> Group | None:
    """One group; None where it cannot be put together, and then the reason is among the problems."""
    before = len(problems)
    edges_mag = edges_of(table)
    profiles = _optional(read_profiles, table, "profiles", folder, problems) or {}
    sheet = _sheet(table, "fields", folder, problems)
    fields = read_fields(sheet, profiles) if sheet is not None else None
    observation = _observation(table, folder, edges_mag, problems)
    counts = used = None
    sheet = _sheet(table, "counts", folder, problems)
    if sheet is not None and fields is not None and edges_mag is not None:
        counts, used = read_counts(sheet, fields.name, edges_mag)
    if len(problems) > before or fields is None or edges_mag is None:
        return None
    if usable(table, "name", TEXT) is None or usable(table, "band", TEXT) is None:
        return None
    extra = tuple(str((folder / e).resolve()) if is_path(e) else e for e in usable(table, "extra", TEXTS) or ())
    return make_group(
        table["name"], table["band"], edges_mag, fields, counts, used,
        observation=observation, extra=extra, profiles=profiles,
    )  # fmt: skip


def _sheet(table: dict, key: str, folder: Path, problems: list[Problem]) -> Sheet | None:
    name = usable(table, key, TEXT)
    return read_sheet(folder, name, problems) if name else None


def _optional(read: Callable, table: dict, key: str, folder: Path, problems: list[Problem]):
    sheet = _sheet(table, key, folder, problems)
    return read(sheet) if sheet is not None else None


def _observation(table: dict, folder: Path, edges_mag: np.ndarray | None, problems: list[Problem]) -> Observation:
    """The observation model, and a problem for each of its tables that does not reach over the bins."""
    observation = Observation(
        completeness=_optional(read_completeness, table, "completeness", folder, problems),
        error=_optional(read_photometric_error, table, "photometric_error", folder, problems),
    )
    if edges_mag is not None:
        for key, words in observation.shortfalls(edges_mag).items():
            if words:
                problems.append(Problem(str(folder / table[key]), "column m", words, "rows out to there"))
    return observation
