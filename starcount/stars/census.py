"""The census of the solar neighbourhood, as counted."""

from dataclasses import dataclass
from importlib.resources import files

import numpy as np

from starcount.stars.bands import require_band
from starcount.stars.cells import CLASSES
from starcount.stars.ecsv import read_ecsv


@dataclass(frozen=True, eq=False)
class Census:
    """Stars counted around the Sun; one row a class and magnitude interval, every array (row,).

    ``radius_pc`` is that of a sphere of ``volume_pc3``, the volume in which stars of the row could be counted (where
    the magnitude limit cuts a row, the effective volume n/(phi dM)). ``systems`` is the factor from stars counted one
    by one to systems seen as one: 0.83 for the 10-pc rows, 1 where companions were not resolved.
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


def census(band: str) -> Census:
    """Return the local census in a band; sources and selections are in the meta of ``data/census_*.ecsv``."""
    require_band(band)
    table = read_ecsv(files(__package__) / "data" / f"census_{band}.ecsv")
    return Census(
        band=band,
        class_index=np.array([CLASSES.index(name) for name in table["class"]]),
        M_lo=np.array(table["M_lo"]),
        M_hi=np.array(table["M_hi"]),
        n=np.array(table["n"]),
        radius_pc=np.array(table["radius"]),
        volume_pc3=np.array(table["volume"]),
        systems=np.array(table["systems"]),
    )
