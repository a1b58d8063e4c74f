"""Invented star lists, surveys to count them into, and the slow way to count them, shared by the tests."""

from functools import cache
from pathlib import Path

import astropy.units as u
import astropy_healpix
import numpy as np
from astropy.coordinates import SkyCoord
from astropy.table import Table

from starcount.survey.fields import Fields, pixel_fields
from starcount.survey.groups import Survey, make_group

EDGES_MAG = np.array([10.0, 11.0, 12.5, 15.0])


def survey(fields: Fields, edges_mag=EDGES_MAG) -> Survey:
    return Survey("invented", "", True, (make_group("stars", "G", edges_mag, fields),))


def all_sky(nside: int = 2, frame: str = "galactic", order: str = "ring") -> Fields:
    pixels = np.arange(12 * nside**2)
    return pixel_fields([str(i) for i in pixels], nside, pixels, frame, order)


def invented_stars(n: int, seed: int = 7) -> Table:
    """Stars all over the sky with every kind of quality column."""
    rng = np.random.default_rng(seed)
    return Table(
        {
            "ra": rng.uniform(0, 360, n) * u.deg,
            "dec": np.degrees(np.arcsin(rng.uniform(-1, 1, n))) * u.deg,
            "Gmag": rng.uniform(9, 16, n).astype("f4") * u.mag,
            "ruwe": rng.uniform(0.8, 2.0, n),
            "n_obs": rng.integers(5, 20, n),
            "kind": rng.choice(["star", "galaxy"], n),
            "variable": rng.uniform(size=n) < 0.3,
        }
    )


def write(stars: Table, path: Path) -> Path:
    kinds = {".ecsv": "ascii.ecsv", ".csv": "ascii.csv", ".parquet": "parquet", ".fits": "fits", ".fit": "fits"}
    stars.write(path, format=kinds[path.suffix])
    return path


def write_csv(path: Path, text: str) -> Path:
    path.write_text(text)
    return path


def pixels_of(stars: Table, nside: int) -> np.ndarray:
    """Galactic pixels (star,), numbered by rings, by astropy's frames and astropy-healpix."""
    place = SkyCoord(stars["ra"], stars["dec"], frame="icrs").galactic
    return astropy_healpix.lonlat_to_healpix(place.l, place.b, nside, order="ring")


def brute_force(stars: Table, fields: Fields, edges_mag=EDGES_MAG) -> np.ndarray:
    """Counts (field, bin) the slow way: astropy's frames and separations, astropy-healpix, numpy's histogram."""
    places = SkyCoord(stars["ra"], stars["dec"], frame="icrs")
    own = {"galactic": places.galactic.spherical, "icrs": places.spherical}

    @cache
    def pixels(frame: str, nside: int, order: str) -> np.ndarray:
        return astropy_healpix.lonlat_to_healpix(own[frame].lon, own[frame].lat, nside, order=order)

    counts = []
    for i in range(len(fields)):
        if fields.nside[i] > 0:
            inside = pixels(fields.pixel_frame[i], fields.nside[i], str(fields.pixel_order[i])) == fields.pixel[i]
        else:
            centre = SkyCoord(fields.l_deg[i], fields.b_deg[i], unit=u.deg, frame="galactic")
            inside = centre.separation(places).deg <= fields.radius_deg[i]
        counts.append(np.histogram(np.asarray(stars["Gmag"], dtype=float)[inside], edges_mag)[0])
    return np.array(counts)
