"""A population of the user's own with luminosity functions, in V or G, and the colours of a metallicity."""

import logging
from functools import cache
from pathlib import Path

import numpy as np

from starcount.stars.cells import CLASSES
from starcount.stars.ecsv import read_ecsv
from starcount.stars.evolved import REFERENCES
from starcount.stars.functions import FunctionTable, function_table
from starcount.stars.loci import METALLICITY, locus_of, named_locus
from starcount.stars.locus import Locus
from starcount.stars.own import Own
from starcount.stars.own_file import OwnFile
from starcount.stars.spread import spread
from starcount.stars.tracks import metallicities

log = logging.getLogger(__name__)

Colours = str | tuple[float, float]
"""Where colours come from: the name of one of our loci, or mean and spread of [Fe/H]."""

_UNSAID = "census"
_ANY_TEMPERATURE_K = np.array([5800.0])


def own_function(own: OwnFile) -> Own:
    """Return a population with a table of functions and its colours by ``colours_of`` or ``metallicity``.

    The table is that of ``functions.function_table``; ``band``, ``counts`` and ``window`` are settings of the file.
    """
    own.known({"band", "colours_of", "metallicity"})
    colours = _colours(own)
    own.done()
    own.table.meta.update({key: own.settings[key] for key in ("band", "counts", "window") if key in own.settings})
    return _of_table(own, function_table(own.table, own.table_file), colours)


def bare_function(path: Path) -> Own:
    """Return a population from an ECSV table alone; colours are those of its meta key ``colours_of``."""
    table = read_ecsv(path)
    own = OwnFile(path, {"name": path.stem, "colours_of": _UNSAID, **table.meta}, table)
    if "colours_of" not in table.meta:
        log.warning("%s: no meta key colours_of; its stars get the colours and temperatures of the census", path)
    colours = _colours(own)
    own.done()
    return _of_table(own, function_table(table, str(path)), colours)


def metallicity_setting(own: OwnFile) -> tuple[float, float]:
    """Return mean and spread of the setting ``metallicity``; what is wrong with it is noted."""
    block = own.block("metallicity", {"mean", "spread"})
    mean = own.number("metallicity.mean", block.get("mean"), "[Fe/H] from -5 to 1", lambda feh: -5 <= feh <= 1)
    spread_dex = own.number("metallicity.spread", block.get("spread"), "0 to 2 dex", lambda dex: 0 <= dex <= 2)
    return mean, spread_dex


def _colours(own: OwnFile) -> Colours:
    given = [key for key in ("colours_of", "metallicity") if key in own.settings]
    if len(given) != 1:
        own.wrong("colours_of, metallicity", " and ".join(given) or "neither", "one of the two")
        return _UNSAID
    if given == ["metallicity"]:
        return _near_the_tracks(own, metallicity_setting(own))
    name = own.settings["colours_of"]
    if not isinstance(name, str) or name not in METALLICITY:
        own.wrong("colours_of", repr(name), f"one of {', '.join(METALLICITY)}")
    return str(name)


def _near_the_tracks(own: OwnFile, colours: tuple[float, float]) -> tuple[float, float]:
    """Note a mean [Fe/H] that lies outside that of our tracks by more than its spread."""
    mean, spread_dex = colours
    grid = metallicities("dwarfs")
    if mean < grid[0] - spread_dex or mean > grid[-1] + spread_dex:
        found = f"mean {mean:g} with spread {spread_dex:g}"
        allowed = f"a mean no further than the spread outside {grid[0]:g} to {grid[-1]:g}, the [Fe/H] of our colours"
        own.wrong("metallicity", found, allowed)
    return colours


def _of_table(own: OwnFile, table: FunctionTable, colours: Colours) -> Own:
    def locus(reference: str) -> Locus:
        return named_locus(colours, reference) if isinstance(colours, str) else locus_of(*colours, reference)

    @cache
    def build(reference: str) -> tuple[np.ndarray, Locus]:
        if (table.band == reference).any():
            return table.per_star(reference), locus(reference)
        # Only the other reference band was counted: its stars, moved along the locus.
        other = REFERENCES[1 - REFERENCES.index(reference)]
        by_class = np.eye(len(CLASSES))[:, :, None] * table.per_star(other)
        return spread(locus(other), by_class, reference, None, _ANY_TEMPERATURE_K)[:, 0, :, 0], locus(reference)

    return Own(own.settings["name"], own.file, own.sources, True, build)
