"""The same extinction at every distance: a thin screen in front of all stars."""

from dataclasses import dataclass

import numpy as np

from starcount.dust.entries import Entries, require_A_V


@dataclass(frozen=True)
class Constant:
    """The field's ``A_V_mag`` at all distances."""

    name: str = "constant"
    description: str = "the field's A_V at every distance"
    needs: tuple[str, ...] = ("A_V_mag",)

    def A_V_mag(self, entries: Entries, d_kpc: np.ndarray) -> np.ndarray:
        """Return the extinction (line, node)."""
        require_A_V(entries, self.name)
        return np.broadcast_to(entries.A_V_mag[:, None], d_kpc.shape).copy()
