"""Invented populations of a user's own, written to files for the tests."""

from pathlib import Path

import numpy as np
import tomli_w
from astropy.table import QTable, Table

ENDINGS = (".ecsv", ".fits", ".vot", ".parquet")
ASTROPY = {".ecsv": "ascii.ecsv", ".fits": "fits", ".vot": "votable", ".parquet": "parquet"}

FUNCTION = {"format": 1, "name": "invented", "kind": "function", "colours_of": "thick disc"}
COLOUR_TABLE = {
    "format": 1,
    "name": "invented",
    "kind": "colour table",
    "band": "SDSS r",
    "colour": ["SDSS g", "SDSS r"],
    "window": 10.0,
}
ISOCHRONES = {
    "format": 1,
    "name": "invented",
    "kind": "isochrones",
    "imf": "Kroupa 2001",
    "counts": "systems",
    "star_formation": {"from_Gyr": 5.0, "to_Gyr": 5.0},
    "metallicity": {"mean": 0.0, "spread": 0.0},
    "phases": {"dwarf": [0], "red giant": [2]},
}


def write_own(folder: Path, settings: dict, table: Table, ending: str = ".ecsv", name: str = "own") -> Path:
    """Write a population's TOML and its table; return the path of the TOML."""
    table.write(folder / f"{name}{ending}", format=ASTROPY[ending], overwrite=True)
    path = folder / f"{name}.toml"
    path.write_text(tomli_w.dumps({**settings, "table": f"{name}{ending}"}), encoding="utf-8")
    return path


def function_rows(**columns) -> Table:
    """Dwarfs in V and G, a magnitude a row, from 3 to 12; 1000 stars at 4.5 < M_V < 8.5, as the rows are even."""
    lo = np.tile(np.arange(3.0, 12.0), 2)
    table = QTable({"band": np.repeat(["V", "G"], 9), "class": np.full(18, "dwarf"), "M_lo": lo, "M_hi": lo + 1})
    table["n"] = np.full(18, 250.0)
    for name in ("M_lo", "M_hi"):
        table[name].unit = "mag"
    for name, column in columns.items():
        table[name] = column
    return Table(table)


def colour_rows() -> Table:
    """Dwarfs of M 4 to 7 and colours 0.2 to 1.1, 3 x 3 rows of unequal numbers."""
    M_lo, c_lo = np.repeat([4.0, 5.0, 6.0], 3), np.tile([0.2, 0.5, 0.8], 3)
    table = Table({"M_lo": M_lo, "M_hi": M_lo + 1, "c_lo": c_lo, "c_hi": np.round(c_lo + 0.3, 2)})
    table["class"] = "dwarf"
    table["n"] = [5.0, 1.0, 0.0, 2.0, 7.0, 1.0, 0.0, 3.0, 8.0]
    for name in ("M_lo", "M_hi", "c_lo", "c_hi"):
        table[name].unit = "mag"
    return table


def isochrone_rows(ages_Gyr=(5.0,), fehs=(0.0,), masses=None) -> Table:
    """Isochrones on which everything runs linearly with mass: dwarfs to 1 solar mass, giants to 1.1.

    M_V = 14 - 10 m on the main sequence; G is 0.2 brighter, BP - RP = 2 - m + 0.2 [Fe/H].
    """
    masses = np.array(masses if masses is not None else [*np.arange(0.1, 1.01, 0.05), 1.05, 1.1])
    rows = [(age, feh, m) for feh in fehs for age in ages_Gyr for m in masses]
    age, feh, mass = np.array(rows).T
    M_V = 14 - 10 * mass
    table = Table({"initial_mass": mass, "age": age, "feh": feh, "phase": np.where(mass > 1.0001, 2, 0)})
    table["age"].unit = "Gyr"
    table["Teff"] = 3000 + 3000 * mass
    table["V"], table["G"] = M_V, M_V - 0.2
    table["BP"], table["RP"] = M_V - 0.2 + (2 - mass + 0.2 * feh) / 2, M_V - 0.2 - (2 - mass + 0.2 * feh) / 2
    return table
