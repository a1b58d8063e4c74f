"""Groups and surveys: fields that share bins, band and observation model."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from starcount.survey.fields import Fields
from starcount.survey.observation import Observation
from starcount.survey.sight_lines import SightLines, sight_lines

EXTRA_TABLES = ("quasars", "galaxies")
"""Extra rows that come with the package; any other is the path of a table."""


@dataclass(frozen=True, eq=False)
class Group:
    """Fields counted in the same magnitude bins of one band, seen in the same way.

    ``edges_mag`` (bin + 1,); bins are closed at the bright end and open at the faint one. ``counts``
    (field, bin) or None where nothing was counted yet; ``used`` (field, bin) is False where a bin was
    not counted or is left out, and there ``counts`` is 0. ``extra`` names tables of objects that pass
    as stars: those of the package, or absolute paths. ``profiles``: extinction profiles by name, as
    distances (kpc) and A_V (mag).
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
    **more,
) -> Group:
    """A group with its sight lines; every bin is used unless ``used`` says otherwise.

    ``more``: observation, extra, profiles, as in Group.
    """
    edges_mag = np.asarray(edges_mag, float)
    if used is None:
        used = np.ones((len(fields), edges_mag.size - 1), dtype=bool)
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
        **more,
    )
