"""Groups and surveys: fields that share bins, band and observation model."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from starcount.survey.bins import Bins, flat_bins
from starcount.survey.fields import Fields
from starcount.survey.observation import Observation
from starcount.survey.sight_lines import SightLines, sight_lines

EXTRA_TABLES = ("quasars", "galaxies")
"""Extra rows that come with the package; any other is the path of a table."""


@dataclass(frozen=True, eq=False)
class Group:
    """Fields counted in the same bins of magnitude in one band, or of magnitude and colour, seen in the same way.

    ``edges_mag`` (m bin + 1,); ``colour``: the two bands of the colour, bluer first, or None; ``edges_colour_mag``
    (colour bin + 1,), which may begin with -inf and end with inf: open bins that take everything beyond. Bins are
    closed at the bright (blue) end and open at the faint (red) one, and stored flat, magnitude before colour:
    bin = m bin * colour bins + colour bin. ``counts`` (field, bin) or None where nothing was counted yet; ``used``
    (field, bin) is False where a bin was not counted or is left out, and there ``counts`` is 0. ``extra`` names tables
    of objects that pass as stars: those of the package, or absolute paths. ``profiles``: extinction profiles by name,
    as distances (kpc) and A_V (mag). ``resolution_arcsec``: pairs of stars wider than this are seen as two; None where
    pairs are left as the luminosity functions have them.
    """

    name: str
    band: str
    edges_mag: np.ndarray
    fields: Fields
    sight_lines: SightLines
    counts: np.ndarray | None
    used: np.ndarray
    observation: Observation
    extra: tuple[str, ...]
    profiles: Mapping[str, tuple[np.ndarray, np.ndarray]]
    colour: tuple[str, str] | None = None
    edges_colour_mag: np.ndarray | None = None
    resolution_arcsec: float | None = None

    @property
    def n_bin(self) -> int:
        """Bins of a field."""
        return _bin_count(self.edges_mag, self.edges_colour_mag)

    @property
    def bins(self) -> Bins:
        """The limits of all bins, flat."""
        return flat_bins(self.band, self.edges_mag, self.colour, self.edges_colour_mag)


@dataclass(frozen=True, eq=False)
class Survey:
    """One or more groups; ``invented`` marks data that nobody observed, ``path`` the file it came from, if any."""

    name: str
    description: str
    invented: bool
    groups: tuple[Group, ...]
    path: Path | None = None


def make_group(
    name: str,
    band: str,
    edges_mag,
    fields: Fields,
    counts: np.ndarray | None = None,
    used: np.ndarray | None = None,
    *,
    colour: tuple[str, str] | None = None,
    edges_colour_mag=None,
    **more,
) -> Group:
    """A group with its sight lines; every bin is used unless ``used`` says otherwise.

    ``more``: observation, extra, profiles, resolution_arcsec, as in Group.
    """
    edges_mag = np.asarray(edges_mag, float)
    if colour is not None:
        colour, edges_colour_mag = tuple(colour), np.asarray(edges_colour_mag, float)
    if used is None:
        used = np.ones((len(fields), _bin_count(edges_mag, edges_colour_mag)), dtype=bool)
    if counts is not None:
        counts = np.where(used, counts, 0).astype(np.int64)
    more = {"observation": Observation(), "extra": (), "profiles": {}} | more
    return Group(
        name=name,
        band=band,
        edges_mag=edges_mag,
        fields=fields,
        sight_lines=sight_lines(fields),
        counts=counts,
        used=used,
        colour=colour,
        edges_colour_mag=edges_colour_mag,
        **more,
    )


def _bin_count(edges_mag: np.ndarray, edges_colour_mag: np.ndarray | None) -> int:
    return (edges_mag.size - 1) * (1 if edges_colour_mag is None else edges_colour_mag.size - 1)
