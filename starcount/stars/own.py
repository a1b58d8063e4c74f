"""A population of the user's own: what the rest of the package sees of it."""

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from starcount.constants import REFERENCE_WINDOW_MV_MAG
from starcount.stars.bands import BANDS, SYSTEMS
from starcount.stars.binaries import system_factor
from starcount.stars.cells import CLASSES, M_MIDDLE_MAG, window
from starcount.stars.loci import named_locus
from starcount.stars.locus import Locus
from starcount.stars.own_file import OwnFile

TEFF_RANGE_K = (1000.0, 500_000.0)
"""Temperatures that stars may have: cooler are no stars, hotter no more than a young white dwarf. A logarithm in the
place of a temperature is outside."""

LEAST_SCATTER_MAG = 1e-3
"""Colours that a table gives as they are get this little: it moves nothing by a cell."""


@dataclass(frozen=True, eq=False)
class Own:
    """A population of the user's own: its name, its file, the sources it names, whether its colours come from our loci.

    ``build(reference)`` returns its function (class, cell), per system with 4.5 < M_V < 8.5, and its ``Locus``. A
    table without the reference band is counted in a band it has: the two agree with each other, and the locus has no
    magnitude in the reference band, so that counts in that band are refused.
    """

    name: str
    file: str
    sources: tuple[str, ...]
    our_colours: bool
    build: Callable[[str], tuple[np.ndarray, Locus]]

    def per_star(self, reference: str) -> np.ndarray:
        """Return the luminosity function (class, cell) of systems, per system with 4.5 < M_V < 8.5."""
        return self.build(reference)[0]

    def locus(self, reference: str) -> Locus:
        """Return the kinds of stars behind ``per_star(reference)``."""
        return self.build(reference)[1]


@dataclass(frozen=True, eq=False)
class Kinds:
    """Numbers of stars by kind in the cells of ``band``, every array (point,).

    Magnitudes as far as known; ``pairs`` holds colours whose two magnitudes are not.
    """

    band: str
    class_index: np.ndarray
    cell: np.ndarray
    number: np.ndarray
    Teff_K: np.ndarray
    scatter_mag: np.ndarray
    M_mag: dict[str, np.ndarray]
    pairs: dict[tuple[str, str], np.ndarray] = field(default_factory=dict)

    def function(self) -> np.ndarray:
        """Return the stars by class and cell, (class, cell)."""
        lf = np.zeros((len(CLASSES), M_MIDDLE_MAG.size))
        np.add.at(lf, (self.class_index, self.cell), self.number)
        return lf

    def locus(self) -> Locus:
        """Return the kinds as a locus: magnitudes moved to the middles of the cells, nan in bands without any."""
        middle = M_MIDDLE_MAG[self.cell]
        moved = middle - self.M_mag[self.band]
        nothing = np.full(self.cell.size, np.nan)
        M_mag = {band: self.M_mag[band] + moved if band in self.M_mag else nothing for band in BANDS}
        M_mag[self.band] = middle
        return Locus(
            class_index=self.class_index,
            cell=self.cell,
            share=self._shares(),
            Teff_K=self.Teff_K,
            scatter_mag=self.scatter_mag,
            M_mag=M_mag,
            inside={system: np.ones(self.cell.size, bool) for system in SYSTEMS},
            pairs=self.pairs,
        )

    def _shares(self) -> np.ndarray:
        """Return each kind's share of its class and cell (point,): equal ones where there are no stars."""
        stars = self.function()[self.class_index, self.cell]
        place = self.class_index * M_MIDDLE_MAG.size + self.cell
        equal = 1 / np.bincount(place)[place]
        return np.divide(self.number, stars, out=equal, where=stars > 0)


def own_window(own: OwnFile, lf_V: np.ndarray | None) -> float:
    """Return the systems of the reference window: counted in V where the table has it, else the file's own number."""
    if lf_V is not None:
        stars, where = window(lf_V), "stars with 4.5 < M_V < 8.5"
    else:
        stars, where = own.window, "window"
    lo, hi = REFERENCE_WINDOW_MV_MAG
    allowed = f"more than 0 of the table's systems with {lo:g} < M_V < {hi:g}" + ("" if lf_V is not None else " (no V)")
    found = own.number(where, stars, allowed, lambda value: value > 0)
    own.done()
    return found


def require_stars(own: OwnFile, lf: np.ndarray) -> None:
    """Note a table that holds no stars: a population of nothing would be predicted without a word."""
    if not lf.any():
        own.wrong_table("rows", "no stars in any of them", "some stars")


def systems_per_star(class_index: np.ndarray, M_V_mag: np.ndarray) -> np.ndarray:
    """Return the factor (point,) from stars to systems: that of binaries for dwarfs, 1 for all others.

    A giant outshines its companion and stays in the count.
    """
    return np.where(class_index == CLASSES.index("dwarf"), system_factor(M_V_mag), 1.0)


def M_V_of_dwarfs(band: str, M_mag: np.ndarray) -> np.ndarray:
    """Return M_V of dwarfs of the Sun's composition with these absolute magnitudes in ``band``, in their shape."""
    mean = _dwarf_means()
    return np.interp(M_mag, mean[band], mean["V"])


def Teff_of_dwarfs(blue: str, red: str, colour_mag: np.ndarray) -> np.ndarray:
    """Return the temperature of dwarfs of the Sun's composition with these colours, in their shape."""
    mean = _dwarf_means()
    colour = mean[blue] - mean[red]
    known = np.flatnonzero(np.isfinite(colour))
    order = known[np.argsort(colour[known])]
    return np.exp(np.interp(colour_mag, colour[order], np.log(mean["Teff"][order])))


def _dwarf_means() -> dict[str, np.ndarray]:
    """Means over the metallicities of the census by cell of M_G, (cell,) each."""
    locus = named_locus("census", "G")
    dwarfs = np.flatnonzero(locus.of_class("dwarf"))
    cell, share = locus.cell[dwarfs], locus.share[dwarfs]
    columns = {**locus.M_mag, "Teff": locus.Teff_K}
    return {name: np.bincount(cell, share * values[dwarfs]) for name, values in columns.items()}
