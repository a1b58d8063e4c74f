"""Reading a survey: settings and tables, with everything that is wrong in one error."""

from collections.abc import Callable, Collection, Mapping
from pathlib import Path

import numpy as np

from starcount.errors import Problem, Problems
from starcount.survey.bin_settings import COLOUR, edges_of
from starcount.survey.count_table import read_counts
from starcount.survey.curve_tables import read_colour_error, read_completeness, read_photometric_error, read_profiles
from starcount.survey.faint_BP import FaintBP
from starcount.survey.field_table import read_fields
from starcount.survey.group_settings import Bands, is_path
from starcount.survey.groups import Group, Survey, make_group
from starcount.survey.keys import NUMBER, TABLES, TEXT, TEXTS, usable
from starcount.survey.observation import Observation
from starcount.survey.settings import read_settings
from starcount.survey.sheet import Sheet, read_sheet

SETTINGS_FILE = "survey.toml"


def read_survey(
    path: str | Path, bands: Collection[str] | None = None, absent: Mapping[str, str] | None = None
) -> Survey:
    """The survey of a ``survey.toml`` (or of the folder that holds one) with all its tables.

    Raises Problems with everything that is wrong. With ``bands`` a group in any other band, or with another band in
    its colour, is refused, with the reason if ``absent`` has one; without, the names of bands are taken as they are.
    With a mapping from names to objects with ``wavelength_nm`` so is a colour whose first band is not the bluer one.
    """
    path = Path(path)
    path = path / SETTINGS_FILE if path.is_dir() else path
    settings, problems = read_settings(path, Bands(bands, absent or {}))
    tables = usable(settings, "group", TABLES) or []
    groups = [_group(table, path.parent, problems) for table in tables]
    if problems:
        raise Problems(*dict.fromkeys(problems))
    return Survey(settings["name"], settings.get("description", ""), settings["invented"], tuple(groups), path)


def _group(table: dict, folder: Path, problems: list[Problem]) -> Group | None:
    """One group; None where it cannot be put together, and then the reason is among the problems."""
    before = len(problems)
    colour = usable(table, "colour", TEXTS)
    edges_mag, edges_colour_mag = edges_of(table), edges_of(table, COLOUR) if colour else None
    binned = edges_mag is not None and ("colour" not in table or edges_colour_mag is not None)
    profiles = _optional(read_profiles, table, "profiles", folder, problems) or {}
    sheet = _sheet(table, "fields", folder, problems)
    fields = read_fields(sheet, profiles) if sheet is not None else None
    observation = _observation(table, folder, edges_mag, problems)
    counts = used = None
    sheet = _sheet(table, "counts", folder, problems)
    if sheet is not None and fields is not None and binned:
        counts, used = read_counts(sheet, fields.name, edges_mag, edges_colour_mag)
    if len(problems) > before or fields is None or not binned:
        return None
    if usable(table, "name", TEXT) is None or usable(table, "band", TEXT) is None:
        return None
    extra = tuple(str((folder / e).resolve()) if is_path(e) else e for e in usable(table, "extra", TEXTS) or ())
    return make_group(
        table["name"], table["band"], edges_mag, fields, counts, used, colour=colour, edges_colour_mag=edges_colour_mag,
        observation=observation, extra=extra, profiles=profiles, resolution_arcsec=_number(table, "resolution_arcsec"),
    )  # fmt: skip


def _sheet(table: dict, key: str, folder: Path, problems: list[Problem]) -> Sheet | None:
    name = usable(table, key, TEXT)
    return read_sheet(folder, name, problems) if name else None


def _number(table: dict, key: str) -> float | None:
    value = usable(table, key, NUMBER)
    return None if value is None else float(value)


def _optional(read: Callable, table: dict, key: str, folder: Path, problems: list[Problem]):
    sheet = _sheet(table, key, folder, problems)
    return read(sheet) if sheet is not None else None


def _observation(table: dict, folder: Path, edges_mag: np.ndarray | None, problems: list[Problem]) -> Observation:
    """The observation model, and a problem for each of its tables that does not fit the bins."""
    noise = _number(table, "faint_BP_noise")
    observation = Observation(
        completeness=_optional(read_completeness, table, "completeness", folder, problems),
        error=_optional(read_photometric_error, table, "photometric_error", folder, problems),
        colour_error=_optional(read_colour_error, table, "colour_error", folder, problems),
        faint_BP=None if noise is None else FaintBP(noise, table.get("band", "")),
    )
    if observation.completeness_in_colour and "colour" not in table:
        allowed = "no such column in a group without a colour"
        problems.append(Problem(str(folder / table["completeness"]), "columns", "column 'c'", allowed))
    if edges_mag is not None:
        for key, words in observation.shortfalls(edges_mag).items():
            if words:
                problems.append(Problem(str(folder / table[key]), "column m", words, "rows out to there"))
    return observation
