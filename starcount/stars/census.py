"""The census of the solar neighbourhood, as counted."""

from dataclasses import dataclass
from importlib.resources import files

import numpy as np

from starcount.stars.bands import require_band
from starcount.stars.cells import CLASSES, members
from starcount.stars.ecsv import read_ecsv
from starcount.stars.evolved import require_reference

CENSUS_CLASSES = ("dwarf", "evolved", "white dwarf")
"""The classes that the census counts apart: it cannot tell clump stars from red giants one by one."""

CENSUS_SETS = np.array([[c in members(word) for c in range(len(CLASSES))] for word in CENSUS_CLASSES], float)
"""1 where a class of stars belongs to a class of the census, else 0; (census class, class)."""
CENSUS_SETS.setflags(write=False)


@dataclass(frozen=True, eq=False)
class Census:
    """Stars counted around the Sun; one row a class and magnitude interval, every array (row,).

    ``class_index`` points into ``CENSUS_CLASSES``. ``radius_pc`` is that of a sphere of ``volume_pc3``, the volume in
    which stars of the row could be counted (where the magnitude limit cuts a row, the effective volume n/(phi dM)).
    ``systems`` is the factor from stars counted one by one to systems seen as one: 0.83 for the 10-pc rows, 1 where
    companions were not resolved.
    Rows are ordered by class and magnitude, without gaps inside a class; their limits are cell edges.
    """

    band: str
    class_index: np.ndarray
    M_lo: np.ndarray
    M_hi: np.ndarray
    n: np.ndarray
    radius_pc: np.ndarray
    volume_pc3: np.ndarray
    systems: np.ndarray

    @property
    def density_pc3(self) -> np.ndarray:
        """Systems per cubic parsec in each row's sphere, (row,)."""
        return self.n / self.volume_pc3 * self.systems


def census(reference: str) -> Census:
    """Return the local census in a reference band, V or G; sources and selections: meta of ``data/census_*.ecsv``."""
    require_band(reference)
    require_reference(reference)
    table = read_ecsv(files(__package__) / "data" / f"census_{reference}.ecsv")
    return Census(
        band=reference,
        class_index=np.array([CENSUS_CLASSES.index(name) for name in table["class"]]),
        M_lo=np.array(table["M_lo"]),
        M_hi=np.array(table["M_hi"]),
        n=np.array(table["n"]),
        radius_pc=np.array(table["radius"]),
        volume_pc3=np.array(table["volume"]),
        systems=np.array(table["systems"]),
    )
