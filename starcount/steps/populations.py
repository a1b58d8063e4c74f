"""Showing a population: its function, colours and classes, as tables and a figure."""

from collections.abc import Mapping
from pathlib import Path

import numpy as np
import tomli_w

from starcount import stars
from starcount.dust.bands import FLAT_TEMPERATURE_K
from starcount.errors import InputError
from starcount.files import write_text
from starcount.galaxy import Galaxy
from starcount.stars.bands import bluer_first, require_band
from starcount.stars.own_tables import read_own
from starcount.stars.sources import sources
from starcount.steps import folder, inputs, record
from starcount.steps.record import Run

CENSUS = "census"
PER_SYSTEM = "system with 4.5 < M_V < 8.5"

COLOURS = {
    "Gaia": ("BP", "RP"),
    "Johnson-Cousins": ("B", "V"),
    "SDSS": ("SDSS g", "SDSS r"),
    "PS1": ("PS1 g", "PS1 r"),
    "LSST": ("LSST g", "LSST r"),
    "2MASS": ("J", "Ks"),
}
"""The colour shown beside a band where none is asked for, by system."""

_ANY_TEMPERATURE_K = np.array([FLAT_TEMPERATURE_K])


def show(
    name: str | Path, band: str, colour: tuple[str, str] | None, galaxy: str | Path, out: str | Path | None
) -> Run:
    """Write a population's function, colour-magnitude table and figure; see ``starcount.steps.population``."""
    from starcount.report.population import colour_columns, function_columns, population_figure
    from starcount.report.style import save_figure
    from starcount.report.tables import write_table

    for given in (band, *(colour or ())):
        require_band(given)
    if colour and not bluer_first(*colour):
        raise InputError(f"colour {' '.join(colour)}: expected two different bands, bluer first")
    is_file = Path(name).suffix in {".toml", ".ecsv"}
    name = Path(name) if is_file else str(name)
    final = folder.run_path(_run_name(name)) if out is None else folder.new(Path(out))
    found = inputs.read_galaxy(galaxy)
    table, result = _table(name, band, colour, found)
    result["sources"] = list(sources(name, stars.BANDS[band].reference, (band, *(table.colour or ()))))
    options = {"population": str(name), "band": band, "colour": colour and list(colour), "galaxy": str(galaxy)}
    given = [*(inputs.population_files(name) if is_file else []), *inputs.galaxy_files(galaxy, found)]
    with folder.replaced(final) as part:
        written = record.write(part, final, "population", options, given, result)
        meta = record.meta(written)
        write_table(function_columns(table), part / "function", meta)
        if table.colour:
            write_table(colour_columns(table), part / "colour-magnitude", meta)
            write_text(part / "colour-magnitude.toml", _as_own(table, stars_of_window=result["window"]))
        save_figure(population_figure(table), part / "population", written["provenance"])
    return Run(final, written)


def _run_name(name: str | Path) -> str:
    plain = name.stem if isinstance(name, Path) else name
    return "population-" + "".join(letter if letter.isalnum() and letter.isascii() else "-" for letter in plain)


def _table(name: str | Path, band: str, colour: tuple[str, str] | None, galaxy: Galaxy):
    """Return the population's table in a band and colour, and what there is to say about it."""
    from starcount.report.population import PopulationTable

    reference = stars.BANDS[band].reference
    locus = stars.locus(name, reference)
    lf, window = _function(name, galaxy, reference)
    colour, why_not = _colour(locus, lf, band, colour)
    by_class = np.eye(len(stars.CLASSES))[:, :, None] * lf * window
    table = PopulationTable(
        name=read_own(name).name if isinstance(name, Path) else name,
        band=band,
        colour=colour,
        per="pc3" if name == CENSUS else PER_SYSTEM,
        classes=stars.CLASSES,
        M_edges_mag=stars.M_EDGES_MAG,
        C_edges_mag=stars.C_EDGES_MAG if colour else stars.C_EDGES_MAG[[0, -1]],
        stars=stars.spread(locus, by_class, band, colour, _ANY_TEMPERATURE_K)[:, 0],
    )
    outside = {given: stars.outside_share(locus, lf, given) for given in (band, *(colour or ()))}
    return table, {**_result(table, name, galaxy), "window": window, "outside": outside, "no_colour": why_not}


def _function(name: str | Path, galaxy: Galaxy, reference: str) -> tuple[np.ndarray, float]:
    """Return the function (class, cell) per system of the window, and the systems of the window it is shown for.

    Those are 1 but for the census, which has a density at the Sun: that of the component it fills, in pc^-3.
    """
    if name != CENSUS:
        return stars.population(name, reference), 1.0
    from starcount.forward import layer_functions

    mine = [component.population == CENSUS for component, _ in galaxy.layers]
    if not any(mine):
        raise InputError(f"Galaxy {galaxy.name!r}: no component has the population 'census'; expected one that has")
    component = next(c for c in galaxy.components if c.population == CENSUS)
    density_pc3 = float(galaxy.amplitudes(galaxy.values)[component.name])
    return layer_functions(galaxy, reference)[mine].sum(axis=0), density_pc3


def _colour(locus: stars.Locus, lf: np.ndarray, band: str, colour: tuple[str, str] | None):
    """Return the colour to show, and why there is none; one that was asked for is taken as it is."""
    if colour is not None:
        return colour, None
    if locus.pairs:
        return next(iter(locus.pairs)), None
    system = stars.BANDS[band].system
    if system not in COLOURS:
        return None, f"none is usual in the system {system}; choose one"
    usual = COLOURS[system]
    held = lf[locus.class_index, locus.cell] * locus.share > 0
    if np.isfinite(locus.colour_mag(*usual)[held]).all():
        return usual, None
    return None, f"{' - '.join(usual)} is not known for all its stars; choose another colour"


def _result(table, name: str | Path, galaxy: Galaxy) -> dict:
    """What a record says: classes, the function by whole magnitudes, and where the Galaxy has this population."""
    edges, by_magnitude = table.in_magnitude(1.0)
    amplitudes = galaxy.amplitudes(galaxy.values)
    totals = table.stars.sum(axis=(1, 2))
    return {
        "per": table.per,
        "colour": table.colour and list(table.colour),
        "classes": [
            {"class": table.classes[c], "stars": float(totals[c]), "share": float(totals[c] / totals.sum())}
            for c in table.held
        ],
        "function": [
            {"M_lo": float(lo), "M_hi": float(hi), **{table.classes[c]: float(row[c] / (hi - lo)) for c in table.held}}
            for lo, hi, row in zip(edges[:-1], edges[1:], by_magnitude.T, strict=True)
        ],
        "components": [
            {"name": c.name, "amplitude": float(amplitudes[c.name]), "anchor": c.anchor}
            for c in galaxy.components
            if c.population == name or Path(c.population).resolve() == Path(name).resolve()
        ],
    }


def _as_own(table, stars_of_window: float) -> str:
    """The settings with which the colour-magnitude table is itself a population."""
    settings: Mapping = {
        "format": 1,
        "name": f"{table.name} in {table.band}",
        "kind": "colour table",
        "table": "colour-magnitude.ecsv",
        "band": table.band,
        "colour": list(table.colour),
        "window": stars_of_window,
    }
    return tomli_w.dumps(settings)
