"""Populations by name or path: their luminosity functions and loci."""

from collections.abc import Iterable
from functools import cache
from importlib.resources import files
from pathlib import Path

import numpy as np

from starcount.constants import REFERENCE_WINDOW_MV_MAG
from starcount.errors import UnknownName
from starcount.stars.bands import require_band
from starcount.stars.cells import CLASSES
from starcount.stars.ecsv import read_ecsv
from starcount.stars.evolved import require_reference
from starcount.stars.functions import FunctionTable, function_table
from starcount.stars.loci import METALLICITY, named_locus
from starcount.stars.locus import Locus
from starcount.stars.own import Own
from starcount.stars.own_tables import read_own
from starcount.stars.tracers import require_not_absent

POPULATIONS = {"thick disc": "thick_disc.ecsv", "halo": "halo.ecsv", "bulge": "bulge.ecsv"}
"""Names of our populations and their tables; each has a line in ``loci.METALLICITY`` too."""


def population(name_or_path: str | Path, reference: str) -> np.ndarray:
    """Return the luminosity function (class, cell) of a population per system in the reference window 4.5 < M_V < 8.5.

    The window is counted in M_V whatever the band, so that fits in V and in G mean the same density: in V rows, or for
    our own populations in G along their locus. Functions of single stars are made functions of systems, window
    included. ``name_or_path`` is a name in ``POPULATIONS`` or a file of the user's own (see ``own_tables``).

    Raises ``UnknownName`` for a population or band, ``Problems`` for the file.
    """
    require_band(reference)
    require_reference(reference)
    if name_or_path in POPULATIONS:
        return _ours(str(name_or_path), reference)
    return _own(name_or_path, POPULATIONS).per_star(reference)


def locus(name_or_path: str | Path, reference: str) -> Locus:
    """Return the locus of a population, or of the "census", for functions counted in a reference band.

    ``name_or_path`` as in ``population``; raises the same errors.
    """
    if name_or_path in METALLICITY:
        return named_locus(str(name_or_path), reference)
    return _own(name_or_path, METALLICITY).locus(reference)


@cache
def _ours(name: str, reference: str) -> np.ndarray:
    lf = our_table(name).per_star(reference)
    if reference != "V":
        lf = lf / _window(lf, locus(name, reference))
    lf.setflags(write=False)
    return lf


def _window(lf: np.ndarray, locus: Locus) -> float:
    """The systems of a function (class, cell) with 4.5 < M_V < 8.5, along its locus, without white dwarfs."""
    low, high = REFERENCE_WINDOW_MV_MAG
    inside = (locus.M_V_mag > low) & (locus.M_V_mag < high) & ~locus.of_class("white dwarf")
    return float((lf[locus.class_index, locus.cell] * locus.share)[inside].sum())


def our_table(name: str) -> FunctionTable:
    """Return the table behind one of our populations."""
    path = files(__package__) / "data" / POPULATIONS[name]
    return function_table(read_ecsv(path), str(path))


def class_fractions(lf: np.ndarray) -> dict[str, float]:
    """Return the share of each class in the stars of a function (..., class, cell)."""
    stars = np.asarray(lf).reshape(-1, *np.shape(lf)[-2:]).sum(axis=(0, 2))
    return dict(zip(CLASSES, map(float, stars / stars.sum()), strict=True))


def _own(name_or_path: str | Path, known: Iterable[str]) -> Own:
    require_not_absent(str(name_or_path))
    if Path(name_or_path).suffix not in {".toml", ".ecsv"}:
        raise UnknownName("population", str(name_or_path), (*known, "PATH.toml", "PATH.ecsv"))
    return read_own(Path(name_or_path))
