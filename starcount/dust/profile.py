"""Extinction against distance from a table of the user's."""

from dataclasses import dataclass

import numpy as np
from scipy.interpolate import PchipInterpolator

from starcount.dust.d0 import D0
from starcount.dust.entries import Entries
from starcount.errors import InputError, UnknownName


@dataclass(frozen=True)
class Profile:
    """The user's (d, A_V) nodes, joined by monotone cubics (Fritsch & Carlson 1980) from A_V = 0 at the Sun.

    Beyond the last node the profile grows as D0 does along the same sight line: a profile ends where its tracers end,
    not where the dust does.
    """

    name: str = "profile"
    description: str = "a table of A_V against distance, continued with the gradient of D0"
    needs: tuple[str, ...] = ("profile",)

    def A_V_mag(self, entries: Entries, d_kpc: np.ndarray) -> np.ndarray:
        """Return the extinction (line, node); raises ``UnknownName`` for a profile, ``InputError`` for its numbers."""
        A_V = np.empty(d_kpc.shape)
        entries.refuse(entries.profile == "", "dust 'profile' without a profile; expected the name of one")
        for name in np.unique(entries.profile):
            if name not in entries.profiles:
                raise UnknownName("dust profile", str(name), tuple(entries.profiles))
            lines = np.flatnonzero(entries.profile == name)
            nodes_kpc, nodes_mag = _nodes(str(name), *entries.profiles[name])
            inside = PchipInterpolator(nodes_kpc, nodes_mag)(np.minimum(d_kpc[lines], nodes_kpc[-1]))
            A_V[lines] = inside + _beyond(entries.take(lines), d_kpc[lines], nodes_kpc[-1])
        return A_V


def _nodes(name: str, d_kpc: np.ndarray, A_V_mag: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the checked nodes, beginning with (0, 0)."""
    d, A = np.asarray(d_kpc, float), np.asarray(A_V_mag, float)
    if not (d.size and np.isfinite(d).all() and np.isfinite(A).all()):
        raise InputError(f"dust profile {name!r}: expected at least one row of finite distances and A_V")
    if d[0] < 0 or (np.diff(d) <= 0).any():
        raise InputError(f"dust profile {name!r}: distances {d.tolist()} kpc; expected rising ones, none negative")
    if A[0] < 0 or (np.diff(A) < 0).any():
        raise InputError(f"dust profile {name!r}: A_V {A.tolist()} mag; expected none negative and none falling")
    if d[0] > 0:
        return np.append(0.0, d), np.append(0.0, A)
    if A[0] > 0 or d.size == 1:
        raise InputError(f"dust profile {name!r}: A_V at the Sun is {A[0]:g} mag; expected 0 there and rows beyond")
    return d, A


def _beyond(entries: Entries, d_kpc: np.ndarray, last_kpc: float) -> np.ndarray:
    """Return what D0 adds beyond the last node, (line, node)."""
    to_last = D0.A_V_mag(entries, np.full((len(d_kpc), 1), last_kpc))
    return np.where(d_kpc > last_kpc, D0.A_V_mag(entries, d_kpc) - to_last, 0.0)
