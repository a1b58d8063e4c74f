"""Stars: luminosity functions of populations, their colours, and the census of the solar neighbourhood.

A luminosity function ``lf`` has the axes (class, cell): ``CLASSES`` and the cells of ``M_EDGES_MAG``, counted in a
reference band, V or G. ``spread`` takes it along a ``Locus`` to any band of ``BANDS`` and to a colour.
To add a population put its ECSV table into ``data/``, a line into ``POPULATIONS`` and one into ``loci.METALLICITY``;
a band needs a line in ``BANDS`` and a column in the tables of loci.
"""

from starcount.stars.bands import BANDS, Band
from starcount.stars.binaries import resolved_gain
from starcount.stars.cells import C_EDGES_MAG, CELL_MAG, CLASSES, EVOLVED, M_EDGES_MAG, M_MIDDLE_MAG, window
from starcount.stars.census import CENSUS_CLASSES, CENSUS_SETS, Census, census
from starcount.stars.evolved import REFERENCES, evolved_split
from starcount.stars.locus import Locus
from starcount.stars.populations import POPULATIONS, class_fractions, locus, population
from starcount.stars.shares import layer_shares
from starcount.stars.spread import outside_share, spread
from starcount.stars.sun import Remainder, census_at_the_sun, remainder
from starcount.stars.tracers import TRACERS_ABSENT

__all__ = [
    "BANDS",
    "CELL_MAG",
    "CENSUS_CLASSES",
    "CENSUS_SETS",
    "CLASSES",
    "C_EDGES_MAG",
    "EVOLVED",
    "M_EDGES_MAG",
    "M_MIDDLE_MAG",
    "POPULATIONS",
    "REFERENCES",
    "TRACERS_ABSENT",
    "Band",
    "Census",
    "Locus",
    "Remainder",
    "census",
    "census_at_the_sun",
    "class_fractions",
    "evolved_split",
    "layer_shares",
    "locus",
    "outside_share",
    "population",
    "remainder",
    "resolved_gain",
    "spread",
    "window",
]
