"""Spreading a luminosity function over another band and a colour, along a locus."""

import math

import numpy as np

from starcount.compilation import kernel
from starcount.errors import InputError
from starcount.stars.cells import C_EDGES_MAG, CELL_MAG, CLASSES, M_MIDDLE_MAG
from starcount.stars.locus import Locus

_REACH = 6.0
"""Gaussians are cut at this many widths; what lies beyond (2e-9) goes to the last cell inside."""


def spread(
    locus: Locus,
    lf_ref: np.ndarray,
    band: str,
    colour: tuple[str, str] | None,
    temperatures_K: np.ndarray,
    weight: np.ndarray | None = None,
) -> np.ndarray:
    """Return the stars (layer, temperature, cell, colour cell) of a reference function in ``band`` and ``colour``.

    ``lf_ref`` (layer, class, cell) is counted in the locus's reference band; ``weight`` (point,) multiplies the stars
    of each kind. Linear in both, and no star is lost: stars move by M_band - M_reference, which falls on two cells in
    general (on one where the band is the reference band), and beyond the cells into the end cells. Without a colour
    there is one colour cell. The temperatures share stars linearly in ln Teff; beyond them the end one takes all.

    Raises ``InputError`` where there are stars of a kind that the locus does not hold, or without a magnitude in a
    band.
    """
    share = locus.share if weight is None else locus.share * weight
    held = lf_ref[:, locus.class_index, locus.cell].any(axis=0) & (share > 0)
    _require_kinds(locus, lf_ref)
    _require_magnitudes(locus, held, (band,) if colour is None or colour in locus.pairs else (band, *colour))
    colour_mag = locus.colour_mag(*colour)[held] if colour else np.zeros(held.sum())
    Teff_K = locus.Teff_K[held]
    _require_finite(np.where(Teff_K > 0, Teff_K, np.nan), colour_mag, locus.scatter_mag[held], share[held])
    temperatures = np.atleast_1d(np.asarray(temperatures_K, float))
    out = np.zeros((len(lf_ref), temperatures.size, M_MIDDLE_MAG.size, C_EDGES_MAG.size - 1 if colour else 1))
    lower, part = _temperature_shares(Teff_K, temperatures)
    _spread(
        np.ascontiguousarray(lf_ref, float),
        locus.class_index[held],
        locus.cell[held],
        share[held],
        (locus.M_mag[band] - locus.middle_mag)[held] / CELL_MAG,
        lower,
        part,
        *_profiles(colour_mag, locus.scatter_mag[held], out.shape[3]),
        out,
    )
    return out


def outside_share(locus: Locus, lf_ref: np.ndarray, name: str) -> float:
    """Return the share of the stars of a function (..., class, cell) that rest on relations outside their range.

    ``name`` is a system or a band; the band of the cells rests on none.
    """
    stars = np.asarray(lf_ref).reshape(-1, *np.shape(lf_ref)[-2:]).sum(axis=0)
    outside = stars[locus.class_index, locus.cell] @ (locus.share * ~locus.inside_of(name))
    return float(outside / stars.sum()) if stars.any() else 0.0


def _require_kinds(locus: Locus, lf_ref: np.ndarray) -> None:
    known = np.zeros(lf_ref.shape[1:], bool)
    known[locus.class_index, locus.cell] = True
    missing = np.argwhere(lf_ref.any(axis=0) & ~known)
    if missing.size:
        c, cell = missing[0]
        raise InputError(
            f"the function holds stars of class {CLASSES[c]!r} at M = {M_MIDDLE_MAG[cell]:.2f}, but its locus does not"
        )


def _require_magnitudes(locus: Locus, held: np.ndarray, bands: tuple[str, ...]) -> None:
    for name in bands:
        missing = np.flatnonzero(held & ~np.isfinite(locus.M_mag[name]))
        if missing.size:
            words = sorted({CLASSES[c] for c in locus.class_index[missing]})
            between = [M_MIDDLE_MAG[locus.cell[missing]].min(), M_MIDDLE_MAG[locus.cell[missing]].max()]
            raise InputError(
                f"stars of class {', '.join(words)} have no magnitude in band {name!r} (reference magnitudes "
                f"{between[0]:.1f} to {between[1]:.1f}): no source gives their colours there"
            )


def _require_finite(*arrays: np.ndarray) -> None:
    """Cells are reckoned from these numbers, and a cell of nan would lie outside the memory of the result."""
    if not all(np.isfinite(array).all() for array in arrays):
        raise InputError(
            "a locus holds a temperature, colour, scatter or share that is no finite number (or Teff <= 0)"
        )


def _temperature_shares(Teff_K: np.ndarray, temperatures_K: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the index (point,) of the temperature below each star's and the share of the one above."""
    if temperatures_K.size == 1:
        return np.zeros(Teff_K.size, np.int64), np.zeros(Teff_K.size)
    at = np.interp(np.log(Teff_K), np.log(temperatures_K), np.arange(temperatures_K.size))
    lower = np.minimum(at.astype(np.int64), temperatures_K.size - 2)
    return lower, at - lower


def _profiles(colour_mag: np.ndarray, scatter_mag: np.ndarray, n_cell: int) -> tuple[np.ndarray, np.ndarray]:
    """Return the first and the last colour cell (point,) of each kind's Gaussian, its centre and its width in cells."""
    if n_cell == 1:
        return np.zeros(colour_mag.size), np.ones(colour_mag.size)
    return (colour_mag - C_EDGES_MAG[0]) / CELL_MAG, scatter_mag / CELL_MAG


@kernel
def _spread(lf, class_index, cell, share, shift, lower, part, centre, width, out):
    """Add every kind of star to its cells: axes as in ``spread``, lengths in cells."""
    n_layer, n_temperature, n_cell, n_colour = out.shape
    profile = np.empty(n_colour)
    for p in range(share.size):
        reach = _REACH * width[p]
        first = min(max(math.floor(centre[p] - reach), 0), n_colour - 1)
        last = min(max(math.floor(centre[p] + reach), first), n_colour - 1)
        below = 0.0
        for k in range(first, last + 1):
            above = 1.0 if k == last else 0.5 * math.erfc((centre[p] - k - 1.0) / (width[p] * math.sqrt(2.0)))
            profile[k] = above - below
            below = above
        whole = math.floor(shift[p])
        for side in range(2):
            to = min(max(cell[p] + whole + side, 0), n_cell - 1)
            moved = shift[p] - whole if side else 1.0 - shift[p] + whole
            for x in range(lower[p], min(lower[p] + 2, n_temperature)):
                kind = share[p] * moved * (part[p] if x > lower[p] else 1.0 - part[p])
                if kind != 0.0:
                    for layer in range(n_layer):
                        stars = kind * lf[layer, class_index[p], cell[p]]
                        if stars != 0.0:
                            for k in range(first, last + 1):
                                out[layer, x, to, k] += stars * profile[k]
