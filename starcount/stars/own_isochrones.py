"""A population of the user's own from a table of isochrones."""

from functools import cache

import numpy as np

from starcount.errors import Problem, UnknownName
from starcount.stars.bands import BANDS
from starcount.stars.cells import M_EDGES_MAG
from starcount.stars.ecsv import numbers, words
from starcount.stars.histories import History, Metallicity
from starcount.stars.imf import MassFunction, mass_function
from starcount.stars.isochrones import Isochrones, Rows, ages_and_metallicities, isochrone_points, isochrones, jumps
from starcount.stars.locus import Locus
from starcount.stars.own import TEFF_RANGE_K, Kinds, M_V_of_dwarfs, Own, own_window, require_stars, systems_per_star
from starcount.stars.own_file import OwnFile
from starcount.stars.own_functions import metallicity_setting
from starcount.stars.phases import LEFT_OUT, classes_by_phase, classes_by_shape

SCATTER_MAG = 0.04

LOG_AGE_RANGE = (5.0, 10.5)
"""Of years: from 100 000 to twice the age of the universe; ages themselves in the column are none of these."""

"""What rotation, companions and photometry of the templates leave about an isochrone; adopted, not measured."""


def own_isochrones(own: OwnFile) -> Own:
    """Return a population born by ``imf``, ``star_formation`` and ``metallicity`` along the isochrones of a table.

    Columns: ``initial_mass`` (solar masses), ``age`` (with its unit) or ``log_age`` (of years), ``feh``, ``Teff`` (K)
    or ``log_Teff``, one column a band under the band's name, and ``phase`` (with the setting ``phases``) or ``log_g``.
    Entries are single stars unless ``counts = "systems"``. Without V ``window`` gives the systems with 4.5 < M_V < 8.5
    for each solar mass formed. Inside the history ages may be a factor of 2 apart, and [Fe/H] 0.5 dex or two spreads.
    """
    own.known({"imf", "star_formation", "metallicity", "phases"})
    imf, history, metallicity = _imf(own), _history(own), Metallicity(*metallicity_setting(own))
    rows = _rows(own)
    own.done()
    lines = isochrones(rows)
    own.problems.extend(_gaps(own, lines, history, metallicity))
    own.done()
    lines = _used(lines, history, metallicity)
    any_band = next(name for name in ("V", "G", *rows.M_mag) if name in rows.M_mag)
    own.problems.extend(jumps(lines, imf, any_band, own.table_file))
    own.done()

    def kinds(band: str) -> Kinds:
        points = isochrone_points(lines, imf, history, metallicity, band)
        number = points.number
        if own.counts != "systems":
            M_V_mag = points.M_mag["V"] if "V" in points.M_mag else M_V_of_dwarfs(band, points.M_mag[band])
            number = number * systems_per_star(points.class_index, M_V_mag)
        scatter = np.full(number.size, SCATTER_MAG)
        return Kinds(band, points.class_index, points.cell, number, points.Teff_K, scatter, dict(points.M_mag))

    in_any_band = kinds(any_band).function()
    require_stars(own, in_any_band)
    own.done()
    stars = own_window(own, in_any_band if any_band == "V" else None)

    @cache
    def build(reference: str) -> tuple[np.ndarray, Locus]:
        found = kinds(reference if reference in rows.M_mag else any_band)
        return found.function() / stars, found.locus()

    return Own(own.settings["name"], own.file, own.sources, False, build)


def _imf(own: OwnFile) -> MassFunction | None:
    try:
        return mass_function(own.settings.get("imf"))
    except UnknownName as unknown:
        own.wrong("imf", repr(own.settings.get("imf")), f"one of {', '.join(sorted(unknown.args[2]))}")
        return None


def _history(own: OwnFile) -> History:
    block = own.block("star_formation", {"from_Gyr", "to_Gyr", "e_folding_Gyr"})

    def age(key: str, youngest_Gyr: float) -> float:
        allowed = f"an age from {youngest_Gyr:g} to 20 Gyr"
        return own.number(f"star_formation.{key}", block.get(key), allowed, lambda age: youngest_Gyr <= age <= 20)

    from_Gyr = age("from_Gyr", 0.0)
    to_Gyr = age("to_Gyr", from_Gyr if from_Gyr > 0 else 0.0)
    fall = block.get("e_folding_Gyr")
    if fall is not None:
        fall = own.number("star_formation.e_folding_Gyr", fall, "more than 0 Gyr", lambda time: time > 0)
    return History(from_Gyr, to_Gyr, fall)


def _rows(own: OwnFile) -> Rows:
    """Return the rows of the table; what is wrong with its columns is noted."""
    bands = [name for name in own.table.colnames if name in BANDS]
    if not bands:
        own.wrong_table("columns", "no band", f"at least one column of {', '.join(BANDS)} (see [columns])")
    mass = _column(own, "initial_mass", "solMass")
    none = np.flatnonzero(mass <= 0)
    own.wrong_rows("initial_mass", none, mass[none], "more than 0")
    age, feh, Teff_K = _age_Gyr(own), _plain(own, "feh"), _Teff_K(own)
    M_mag = {name: _column(own, name, "mag") for name in bands}
    if own.problems:
        nothing = np.zeros(0)
        return Rows(nothing, nothing, nothing, nothing, nothing, {})
    class_index = _classes(own, mass, age, feh, Teff_K)
    _check_ranges(own, class_index != LEFT_OUT, Teff_K, M_mag)
    return Rows(mass, age, feh, class_index, Teff_K, M_mag)


def _check_ranges(own: OwnFile, kept: np.ndarray, Teff_K: np.ndarray, M_mag: dict[str, np.ndarray]) -> None:
    """Note temperatures and magnitudes, of rows that are not left out, that no star has: 99 is no magnitude."""
    if "log_Teff" in own.table.colnames:
        own.beyond("log_Teff", np.where(kept, own.table["log_Teff"], np.nan), *np.log10(TEFF_RANGE_K), "")
    else:
        own.beyond("Teff", np.where(kept, Teff_K, np.nan), *TEFF_RANGE_K, "K")
    for name, M in M_mag.items():
        own.beyond(name, np.where(kept, M, np.nan), M_EDGES_MAG[0], M_EDGES_MAG[-1], "mag")


def _Teff_K(own: OwnFile) -> np.ndarray:
    if "log_Teff" not in own.table.colnames:
        return _column(own, "Teff", "K")
    with np.errstate(over="ignore"):  # refused with its row, see _check_ranges
        return 10 ** _plain(own, "log_Teff")


def _age_Gyr(own: OwnFile) -> np.ndarray:
    """Return the ages; rounded, so that one age is one number in all rows."""
    if "log_age" in own.table.colnames:
        log_age = _plain(own, "log_age")
        own.beyond("log_age", log_age, *LOG_AGE_RANGE, "")
        return 10 ** (np.round(np.clip(log_age, *LOG_AGE_RANGE), 6) - 9)  # what is beyond was noted
    age = numbers(own.table, "age", "Gyr", own.table_file, own.problems)
    none = np.flatnonzero(age <= 0)
    own.wrong_rows("age", none, age[none], "more than 0 Gyr")
    return 10 ** np.round(np.log10(np.where(age > 0, age, np.nan)), 6)


def _classes(own: OwnFile, mass: np.ndarray, age: np.ndarray, feh: np.ndarray, Teff: np.ndarray) -> np.ndarray:
    """Return the class (row,) of each row, -1 where the user leaves it out."""
    log_g = _plain(own, "log_g") if "log_g" in own.table.colnames else None
    if "phase" in own.table.colnames:
        return classes_by_phase(own, _phases(own), feh, log_g)
    if log_g is None:
        own.wrong_table("columns", "neither phase nor log_g", "one of them, to tell dwarfs from giants")
        return np.zeros(mass.size, int)
    return classes_by_shape(mass, age, feh, Teff, log_g)


def _phases(own: OwnFile) -> np.ndarray:
    if np.asarray(own.table["phase"]).dtype.kind in "iuf":
        return _plain(own, "phase")
    return words(own.table, "phase", own.table_file, own.problems)


def _column(own: OwnFile, name: str, unit: str) -> np.ndarray:
    """Return a column; without a unit it is taken to be in ``unit``, the only one in use for such columns."""
    if name in own.table.colnames and own.table[name].unit is None:
        own.table[name].unit = unit
    return numbers(own.table, name, unit, own.table_file, own.problems)


def _plain(own: OwnFile, name: str) -> np.ndarray:
    """Return a column of logarithms or labels, whose unit, if any, says nothing."""
    if name in own.table.colnames:
        own.table[name].unit = None
    return numbers(own.table, name, "", own.table_file, own.problems)


def _used(lines: Isochrones, history: History, metallicity: Metallicity) -> Isochrones:
    ages, fehs = ages_and_metallicities(lines)
    used = {(age, feh) for age, _ in history.nodes(ages) for feh, _ in metallicity.nodes(fehs)}
    return {key: line for key, line in lines.items() if key in used}


def _gaps(own: OwnFile, lines: Isochrones, history: History, metallicity: Metallicity) -> list[Problem]:
    """Return what the ages and metallicities of the table lack."""
    ages, fehs = ages_and_metallicities(lines)
    problems = [*history.problems(ages, own.table_file), *metallicity.problems(fehs, own.table_file)]
    if problems:
        return problems
    for feh, _ in metallicity.nodes(fehs):
        missing = [f"{age:.4g}" for age, _ in history.nodes(ages) if (age, feh) not in lines]
        if missing:
            allowed = "the ages of the other [Fe/H]"
            problems.append(Problem(own.table_file, f"[Fe/H] {feh:g}", f"no age {', '.join(missing)} Gyr", allowed))
    return problems
