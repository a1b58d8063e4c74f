"""Stars: luminosity functions of populations, and the census of the solar neighbourhood.

A luminosity function ``lf`` has the axes (class, cell): ``CLASSES`` and the cells of ``M_EDGES_MAG``.
To add a population put its ECSV table into ``data/`` and a line into ``POPULATIONS``; a band needs a line in
``BANDS``, rows in the population tables and a census table.
"""

from starcount.stars.bands import BANDS, Band
from starcount.stars.cells import CLASSES, M_EDGES_MAG, window
from starcount.stars.census import Census, census
from starcount.stars.populations import POPULATIONS, population
from starcount.stars.shares import layer_shares
from starcount.stars.sun import Remainder, census_at_the_sun, remainder

__all__ = [
    "BANDS",
    "CLASSES",
    "M_EDGES_MAG",
    "POPULATIONS",
    "Band",
    "Census",
    "Remainder",
    "census",
    "census_at_the_sun",
    "layer_shares",
    "population",
    "remainder",
    "window",
]
