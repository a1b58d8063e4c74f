"""A population's locus: which magnitudes, temperatures and colours its stars have, by class and magnitude."""

from dataclasses import dataclass, field, fields

import numpy as np

from starcount.stars.bands import BANDS
from starcount.stars.cells import CLASSES, M_MIDDLE_MAG

_SCATTER_MAG = {
    "subgiant": 0.05,
    "clump": 0.04,
    "horizontal branch": 0.05,
    "white dwarf": 0.10,
}
_DWARFS_MAG = ((0.0, 1.0, 2.2, 3.0, 4.5, 7.0, 9.0), (0.10, 0.14, 0.14, 0.09, 0.05, 0.05, 0.10))
"""Dwarfs of A and F type brighten by a magnitude and more before they count as evolved, and rotate; those of M type
differ in colour by more than their metallicity says."""


_RED_GIANTS = ((3400.0, 4000.0), (0.15, 0.05))
"""Temperature in K and scatter: the coolest vary, by 0.1 to 0.3 mag, and titanium oxide makes their colours differ."""


def scatter_mag(star_class: str, M_mag: np.ndarray, Teff_K: np.ndarray) -> np.ndarray:
    """Return the Gaussian scatter of any colour at one metallicity and reference magnitude, in the shape of ``M_mag``.

    Adopted: what ages, rotation and unresolved companions leave beside the metallicity. Within 25 to 100 pc (Hipparcos)
    the V-I of dwarfs scatters by 0.12, 0.16, 0.09, 0.06, 0.04, 0.06, 0.09, 0.09, 0.13 mag at M_V 1 to 9, metallicity
    included. White dwarfs have the colours of black bodies that agree with dwarfs at 6500 K: 0.1 mag is what masses and
    atmospheres, of hydrogen or helium, put around them.
    """
    if star_class == "dwarf":
        return np.interp(M_mag, *_DWARFS_MAG)
    if star_class == "red giant":
        return np.interp(Teff_K, *_RED_GIANTS)
    return np.full(np.shape(M_mag), _SCATTER_MAG[star_class])


@dataclass(frozen=True, eq=False)
class Locus:
    """Kinds of stars; every array (point,).

    A point is one kind: its class, the cell of its magnitude in the reference band, and the ``share`` of the stars of
    that class and cell that are of this kind, which sums to 1 over the points of every class and cell that can hold
    stars. ``scatter_mag`` is the Gaussian scatter of any of its colours. ``M_mag`` holds its absolute magnitude in
    every band, at the middle of the cell, nan where no source gives one; ``inside`` by system (and by band, for bands
    that differ from their system) whether it is known well enough, see ``inside_of``.
    """

    class_index: np.ndarray
    cell: np.ndarray
    share: np.ndarray
    Teff_K: np.ndarray
    scatter_mag: np.ndarray
    M_mag: dict[str, np.ndarray]
    inside: dict[str, np.ndarray]
    pairs: dict[tuple[str, str], np.ndarray] = field(default_factory=dict)
    """Colours (blue, red) that a table gives without the two magnitudes."""

    def arrays(self) -> dict[str, np.ndarray]:
        """Return all but ``pairs`` as named arrays, for a file; see ``from_arrays``."""
        names = [f.name for f in fields(self) if f.name not in ("M_mag", "inside", "pairs")]
        plain = {name: getattr(self, name) for name in names}
        nested = {f"{key}/{name}": a for key in ("M_mag", "inside") for name, a in getattr(self, key).items()}
        return {**plain, **nested}

    @classmethod
    def from_arrays(cls, arrays: dict[str, np.ndarray]) -> "Locus":
        """Return the locus that ``arrays`` named."""
        plain = {name: a for name, a in arrays.items() if "/" not in name}
        for key in ("M_mag", "inside"):
            plain[key] = {name.split("/", 1)[1]: a for name, a in arrays.items() if name.startswith(f"{key}/")}
        return cls(**plain)

    @property
    def middle_mag(self) -> np.ndarray:
        """The middle of each point's cell of reference magnitude, (point,)."""
        return M_MIDDLE_MAG[self.cell]

    @property
    def M_V_mag(self) -> np.ndarray:
        """Absolute visual magnitude (point,), for functions that are smooth in it; where a user's table gives none, the
        magnitude that it is counted in."""
        M_V_mag = self.M_mag["V"]
        return np.where(np.isfinite(M_V_mag), M_V_mag, self.middle_mag)

    def colour_mag(self, blue: str, red: str) -> np.ndarray:
        """Return a colour (point,), nan where no source gives it."""
        return self.pairs[blue, red] if (blue, red) in self.pairs else self.M_mag[blue] - self.M_mag[red]

    def inside_of(self, *names: str) -> np.ndarray:
        """Return which points (point,) rest on relations inside their verified range in all of some bands or systems.

        What that means is ``loci.VERIFIED_MAG``. The band whose cells these are rests on no relation.
        """
        found = np.ones(self.cell.size, bool)
        for name in names:
            if name not in self.M_mag:
                found &= self.inside[name]
            elif not np.array_equal(self.M_mag[name], self.middle_mag):
                found &= self.inside[name if name in self.inside else BANDS[name].system]
        return found

    def of_class(self, name: str) -> np.ndarray:
        """Return which points belong to a class, (point,) bool."""
        return self.class_index == CLASSES.index(name)
