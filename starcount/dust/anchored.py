"""A total extinction, from a map say, spread along the line as D0 spreads its own."""

from dataclasses import dataclass

import numpy as np

from starcount.dust.d0 import D0
from starcount.dust.entries import Entries, require_A_V

B_MIN_DEG = 2.0
"""Nearer to the plane maps of the total are not reliable: at l = b = 0 that of Schlegel, Finkbeiner & Davis 1998 means
A_V = 273, where stars say 30; and most of a total lies behind the stars."""


@dataclass(frozen=True)
class Anchored:
    """A_V(d) = A_total D0(d) / D0(inf): the field's ``A_V_mag`` is the total of each of its sight lines."""

    name: str = "anchored"
    description: str = "the field's total A_V, spread along the line in the shape of D0"
    needs: tuple[str, ...] = ("A_V_mag",)

    def A_V_mag(self, entries: Entries, d_kpc: np.ndarray) -> np.ndarray:
        """Return the extinction (line, node); raises ``InputError`` within 2 deg of the plane."""
        require_A_V(entries, self.name)
        low = np.abs(entries.field_b_deg) < B_MIN_DEG
        if low.any():
            found = f"dust 'anchored' at b = {entries.field_b_deg[np.argmax(low)]:g} deg"
            entries.refuse(low, f"{found}; expected |b| >= 2, as totals are not reliable below: use 'D0' or 'profile'")
        share = D0.A_V_mag(entries, d_kpc) / D0.total(entries.l_deg, entries.b_deg)[:, None]
        return entries.A_V_mag[:, None] * share
