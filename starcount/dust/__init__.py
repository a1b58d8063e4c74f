"""Dust: the visual extinction along sight lines, and what it is in other bands.

To add a model: write its file, import it here, add it to ``DUST``. A model is an object with ``name``,
``description``, ``needs`` (the field columns without which it cannot work) and
``A_V_mag(entries, d_kpc) -> (line, node)``.
"""

from collections.abc import Mapping

import numpy as np

from starcount.dust.anchored import Anchored
from starcount.dust.bands import TEMPERATURES_K, band_coefficients, extinction_temperatures
from starcount.dust.constant import Constant
from starcount.dust.d0 import D0, DustDisc
from starcount.dust.entries import Entries, entries
from starcount.dust.profile import Profile
from starcount.errors import UnknownName

DUST = {model.name: model for model in (D0, Constant(), Profile(), Anchored())}


def A_V_mag(fields, lines, d_kpc: np.ndarray, profiles: Mapping | None = None) -> np.ndarray:
    """Return the visual extinction (line, node) in mag from the Sun to the distances ``d_kpc`` (line, node).

    ``fields`` has the columns ``name``, ``b_deg``, ``dust`` (a name in ``DUST``), ``A_V_mag``, ``profile`` (field,);
    ``lines`` has ``l_deg``, ``b_deg`` (line,) and ``first`` (field + 1,), the offsets of each field's sight lines.
    ``profiles`` maps a profile's name to its (d_kpc, A_V_mag). Raises ``UnknownName`` for a dust model or profile and
    ``InputError`` for an entry its model cannot work with.
    """
    dust = np.asarray(fields.dust).astype(str)
    for name in np.unique(dust):
        if name not in DUST:
            raise UnknownName("dust model", str(name), tuple(DUST))
    of_line = entries(fields, lines, profiles or {})
    A_V = np.empty(np.shape(d_kpc))
    for name in np.unique(dust):
        chosen = np.flatnonzero(dust[of_line.field] == name)
        A_V[chosen] = DUST[name].A_V_mag(of_line.take(chosen), d_kpc[chosen])
    return A_V


__all__ = [
    "D0",
    "DUST",
    "TEMPERATURES_K",
    "A_V_mag",
    "DustDisc",
    "Entries",
    "band_coefficients",
    "extinction_temperatures",
]
