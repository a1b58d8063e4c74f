"""Extra rows: what is counted as a star but is none of the Galaxy's, per square degree."""

from collections.abc import Sequence
from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path

import numpy as np

from starcount.errors import InputError, Problem, Problems, UnknownName
from starcount.stars.ecsv import numbers, read_ecsv

EXTRA = {"quasars": "quasars.ecsv", "galaxies": "galaxies.ecsv"}
"""Names of our tables, with their errors and assumptions in the meta."""


@dataclass(frozen=True, eq=False)
class ExtraTable:
    """Counts per square degree and magnitude ``n`` (row,) between ``edges_mag`` (row + 1,), and how they go on.

    ``slope`` (row,) is d log10(n)/dm inside each row. ``bright_slope`` continues the first row to brighter
    magnitudes; None ends the table there.
    """

    name: str
    band: str | None
    edges_mag: np.ndarray
    n: np.ndarray
    slope: np.ndarray
    bright_slope: float | None

    def brighter_than(self, m_mag: np.ndarray) -> np.ndarray:
        """Return the counts per square degree brighter than ``m_mag`` (edge,); what the table leaves out counts 0."""
        lo, hi = self.edges_mag[:-1], self.edges_mag[1:]
        shares = _share(np.clip(m_mag[:, None], lo, hi), lo, hi, self.slope)
        total = shares @ (self.n * (hi - lo))
        if self.bright_slope is None:
            return total
        k = self.bright_slope * np.log(10)
        before = self.n[0] / _mean_over_edge(lo[0], hi[0], self.slope[0]) / k
        return total + before * np.exp(k * np.minimum(m_mag - lo[0], 0.0))


def extra_rows(names: Sequence[str], band: str, edges_mag: np.ndarray) -> np.ndarray:
    """Return the expected counts per square degree (extra, bin) of the named tables between ``edges_mag`` (bin + 1,).

    A name is one of ``EXTRA`` (Gaia G only) or the path of an ECSV table with the columns ``m_lo``, ``m_hi`` (mag) and
    ``n`` (per square degree and magnitude), in the band of the survey's group; its meta may state ``band``, which is
    then checked, and ``bright_slope``, d log10(n)/dm brighter than the table. Inside a row the counts follow the slope
    of its neighbours, and the row keeps its total. Nothing is assumed fainter than a table, nor brighter where no
    slope is given: bins that reach there are refused. Counts are as the table gives them, without extinction.

    Raises ``UnknownName``, ``InputError`` for a band or bins the table does not cover, ``Problems`` for its rows.
    """
    edges = np.asarray(edges_mag, float)
    rows = [_counts(_read(name), band, edges) for name in names]
    return np.array(rows).reshape(len(rows), edges.size - 1)


def _counts(table: ExtraTable, band: str, edges_mag: np.ndarray) -> np.ndarray:
    if table.band not in (None, band):
        raise InputError(f"extra row {table.name!r} is in band {table.band}; expected a table in band {band}")
    bright, faint = table.edges_mag[[0, -1]]
    if edges_mag[-1] > faint + 1e-9:
        ends = f"ends at m = {faint:g}, the bins at {edges_mag[-1]:g}"
        raise InputError(f"extra row {table.name!r} {ends}; expected bins inside")
    if table.bright_slope is None and edges_mag[0] < bright - 1e-9:
        raise InputError(
            f"extra row {table.name!r} begins at m = {bright:g}, the bins at {edges_mag[0]:g}; "
            "expected bins inside, or bright_slope in the table's meta"
        )
    return np.diff(table.brighter_than(edges_mag))


def _read(name: str) -> ExtraTable:
    if name in EXTRA:
        path = files(__package__) / "data" / EXTRA[name]
    elif Path(name).suffix == ".ecsv":
        path = Path(name)
    else:
        raise UnknownName("extra row", str(name), (*EXTRA, "PATH.ecsv"))
    table, file, problems = read_ecsv(path), str(path), []
    lo, hi = (numbers(table, column, "mag", file, problems) for column in ("m_lo", "m_hi"))
    n = numbers(table, "n", "1 / (deg2 mag)", file, problems)
    if not problems:
        _check_rows(lo, hi, n, file, problems)
    slope = table.meta.get("bright_slope")
    if slope is not None and not (isinstance(slope, int | float) and 0 < slope < np.inf and n[0] > 0):
        allowed = "a number above 0, and n > 0 in the first row"
        problems.append(Problem(file, "meta key bright_slope", str(slope), allowed))
    if problems:
        raise Problems(*problems)
    return ExtraTable(str(name), table.meta.get("band"), np.append(lo, hi[-1]), n, _slopes(lo, hi, n), slope)


def _check_rows(lo: np.ndarray, hi: np.ndarray, n: np.ndarray, file: str, problems: list[Problem]) -> None:
    if not lo.size:
        problems.append(Problem(file, "", "no rows", "at least one row"))
    for i in range(lo.size):
        if not lo[i] < hi[i]:
            problems.append(Problem(file, f"row {i + 1}", f"m_lo {lo[i]:g}, m_hi {hi[i]:g}", "m_lo < m_hi"))
        if i and abs(lo[i] - hi[i - 1]) > 1e-9:
            problems.append(Problem(file, f"row {i + 1}, m_lo", f"{lo[i]:g}", f"m_hi of the row before, {hi[i - 1]:g}"))
        if n[i] < 0:
            problems.append(Problem(file, f"row {i + 1}, n", f"{n[i]:g}", "no negative number"))


def _slopes(lo: np.ndarray, hi: np.ndarray, n: np.ndarray) -> np.ndarray:
    """Return d log10(n)/dm (row,) from the rows beside each; 0 where a row or all its neighbours are empty."""
    slope, centre = np.zeros(n.size), (lo + hi) / 2
    for i in np.flatnonzero(n > 0):
        first, last = max(i - 1, 0), min(i + 1, n.size - 1)
        first, last = (first if n[first] > 0 else i), (last if n[last] > 0 else i)
        if last > first:
            slope[i] = np.log10(n[last] / n[first]) / (centre[last] - centre[first])
    return slope


def _share(m: np.ndarray, lo: np.ndarray, hi: np.ndarray, slope: np.ndarray) -> np.ndarray:
    """Return the share of each row's counts brighter than ``m``."""
    k = slope * np.log(10)
    flat = np.abs(k) < 1e-9
    k = np.where(flat, 1.0, k)
    return np.where(flat, (m - lo) / (hi - lo), np.expm1(k * (m - lo)) / np.expm1(k * (hi - lo)))


def _mean_over_edge(lo: float, hi: float, slope: float) -> float:
    """Return the mean of a row over its value at the bright edge."""
    x = slope * np.log(10) * (hi - lo)
    return float(np.expm1(x) / x) if abs(x) > 1e-9 else 1.0
