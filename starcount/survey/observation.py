"""Observation model: which share of the stars of a true magnitude and colour is counted in which bin."""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.special import ndtr

from starcount.errors import InputError
from starcount.survey.curves import ColourError, Completeness, PhotometricError, mean_between
from starcount.survey.faint_BP import FaintBP
from starcount.survey.landing import NARROWEST_MAG, land

REACH = 5.0
"""Stars farther from a bin than this many times their scatter are left out: 3e-7 of them land in it."""
_STEP_MAG = 0.02
"""Step in which the reach is looked for."""
NODE_ERROR, NARROWEST_STEP_MAG = 7e-4, 0.1
"""Between nodes the response in colour is a straight line: how far the share below any colour may be off half way, and
how close nodes may come. A bin's share is then good to 1e-3, to 1.5e-3 where an error depends on colour, and to 5e-3
beyond BP - RP = 3 where the bias of faint BP bends faster than such nodes can follow (measured)."""
_COLOUR_CELL_MAG = 0.05
"""Cells of true colour blur the response by this much even without any scatter."""
_PROBED_COLOURS_MAG = np.arange(-0.5, 4.1, 0.5)


@dataclass(frozen=True, eq=False)
class Observation:
    """How the stars of a group were seen; with none of its parts, every star in its own bin.

    Errors in magnitude and in colour are independent of one another. A star is counted with the probability that the
    completeness gives at its true magnitude (and colour).
    """

    completeness: Completeness | None = None
    error: PhotometricError | None = None
    colour_error: ColourError | None = None
    faint_BP: FaintBP | None = None

    @property
    def completeness_in_colour(self) -> bool:
        """Whether the completeness depends on colour, and so belongs to the response in colour."""
        return self.completeness is not None and self.completeness.c_mag is not None

    @property
    def colour_reach_mag(self) -> float:
        """How far from its true colour a star may be catalogued; inf where faint stars may be found at any colour."""
        if self.faint_BP is not None:
            return np.inf
        table = self.colour_error
        return 0.0 if table is None else REACH * float(table.scatter_mag.max()) + float(np.abs(table.offset_mag).max())

    def reach(self, edges_mag: np.ndarray) -> tuple[float, float]:
        """The brightest and faintest true magnitudes of which stars land in the bins."""
        bright, faint = float(edges_mag[0]), float(edges_mag[-1])
        if self.error is None:
            return bright, faint
        farthest = REACH * self.error.scatter_mag.max() + np.abs(self.error.offset_mag).max()
        step = np.arange(0.0, farthest + _STEP_MAG, _STEP_MAG)
        offset, scatter = self.error.at(bright - step)
        brighter = step[bright - step + offset + REACH * scatter > bright].max(initial=-_STEP_MAG)
        offset, scatter = self.error.at(faint + step)
        fainter = step[faint + step + offset - REACH * scatter < faint].max(initial=-_STEP_MAG)
        return float(bright - brighter - _STEP_MAG), float(faint + fainter + _STEP_MAG)

    def magnitude_response(self, true_edges_mag: np.ndarray, edges_mag: np.ndarray) -> np.ndarray:
        """The counted share (true, bin) of the stars of true cells (true + 1,) in bins (bin + 1,).

        The mean of the completeness over the cell, unless it depends on colour, times the probability to be catalogued
        in the bin, for stars uniform in the cell with a Gaussian error. Without errors that is the overlap of cell and
        bin. Raises InputError where a table does not reach over the bins.
        """
        shortfall = self.shortfall(edges_mag)
        if shortfall:
            raise InputError(shortfall)
        true_edges_mag, edges_mag = np.asarray(true_edges_mag, float), np.asarray(edges_mag, float)
        first, last = true_edges_mag[:-1], true_edges_mag[1:]
        offset, scatter = np.zeros_like(first), np.zeros_like(first)
        if self.error is not None:
            offset, scatter = self.error.at((first + last) / 2.0)
        response = _landed(first + offset, last + offset, scatter, edges_mag)
        if self.completeness is None or self.completeness_in_colour:
            return response
        return response * mean_between(self.completeness.m_mag, self.completeness.share, true_edges_mag)[:, None]

    def colour_response(self, m_mag: np.ndarray, true_edges_mag: np.ndarray, edges_mag: np.ndarray) -> np.ndarray:
        """The share (k, cell, bin) of stars of a true colour cell (cell + 1,) in colour bins (bin + 1,).

        At true magnitudes ``m_mag`` (k,). The mean of the completeness over the cell, if it depends on colour, times
        the probability to be catalogued in the bin, for stars uniform in the cell. Open bins take everything beyond.
        """
        m_mag, true_edges_mag = np.asarray(m_mag, float), np.asarray(true_edges_mag, float)
        moved = true_edges_mag + self._colour_offset(m_mag, true_edges_mag)
        scatter = self._colour_scatter(m_mag, (true_edges_mag[1:] + true_edges_mag[:-1]) / 2.0)
        # An offset that falls steeply with colour may squeeze a cell, or turn its ends round.
        middle = (moved[:, 1:] + moved[:, :-1]) / 2.0
        half = np.maximum(np.abs(moved[:, 1:] - moved[:, :-1]), NARROWEST_MAG) / 2.0
        flat = (x.ravel() for x in (middle - half, middle + half, scatter))
        response = _landed(*flat, np.asarray(edges_mag, float)).reshape(*middle.shape, -1)
        if not self.completeness_in_colour:
            return response
        return response * self.completeness.in_cells(m_mag, true_edges_mag)[:, :, None]

    def colour_nodes_mag(self, bright: float, faint: float) -> np.ndarray:
        """True magnitudes (k,) between which the response in colour is a straight line to 1e-3.

        A single one where it does not depend on magnitude.
        """
        tables = [t for t in (self.colour_error, self.completeness) if t is not None and t is not self._plain()]
        if not tables and self.faint_BP is None:
            return np.array([(bright + faint) / 2.0])
        knots = [t.m_mag[(t.m_mag > bright) & (t.m_mag < faint)] for t in tables]
        if self.faint_BP is not None:
            knots.append(np.arange(bright, faint, 0.5))
        knots = np.unique(np.concatenate([[bright, faint], *knots]))
        probed = np.unique(np.concatenate([_PROBED_COLOURS_MAG, *(t.c_mag for t in tables if t.c_mag is not None)]))
        return np.array([bright, *(m for a, b in pairwise(knots) for m in self._nodes(a, b, probed))])

    def shortfall(self, edges_mag: np.ndarray) -> str:
        """In words, how a table falls short of the bins; '' where it does not."""
        return "; ".join(filter(None, self.shortfalls(edges_mag).values()))

    def shortfalls(self, edges_mag: np.ndarray) -> dict[str, str]:
        """The same for each table, by its key in the survey file."""
        found = {}
        for key, table in (("photometric_error", self.error), ("colour_error", self.colour_error)):
            if table is not None:
                found[key] = _gap(table.m_mag, edges_mag[0], edges_mag[-1], "the bins reach")
        if self.completeness is not None:
            reason = "the bins" + (" and the scatter into them" if self.error is not None else "") + " reach"
            found["completeness"] = _gap(self.completeness.m_mag, *self.reach(edges_mag), reason)
        return found

    def _plain(self) -> Completeness | None:
        """The completeness, where it is a matter of magnitude alone."""
        return None if self.completeness_in_colour else self.completeness

    def _colour_offset(self, m_mag, c_mag) -> np.ndarray:
        offset = np.zeros((len(m_mag), len(c_mag)))
        if self.colour_error is not None:
            offset += self.colour_error.at(m_mag, c_mag)[0]
        if self.faint_BP is not None:
            offset += self.faint_BP.offset_mag(m_mag, c_mag)
        return offset

    def _colour_scatter(self, m_mag, c_mag) -> np.ndarray:
        return (
            np.zeros((len(m_mag), len(c_mag))) if self.colour_error is None else self.colour_error.at(m_mag, c_mag)[1]
        )

    def _nodes(self, bright: float, faint: float, probed: np.ndarray) -> Iterator[float]:
        """Nodes after ``bright`` up to ``faint``: halved until the response half way is that of a straight line."""
        if faint - bright > NARROWEST_STEP_MAG and self._bend(bright, faint, probed) > NODE_ERROR:
            middle = (bright + faint) / 2.0
            yield from self._nodes(bright, middle, probed)
            yield from self._nodes(middle, faint, probed)
        else:
            yield faint

    def _bend(self, bright: float, faint: float, probed: np.ndarray) -> float:
        """How far the counted share below any colour is off a straight line, half way between two magnitudes."""
        m = np.array([bright, (bright + faint) / 2.0, faint])
        offset = self._colour_offset(m, probed)[:, :, None]
        scatter = np.hypot(self._colour_scatter(m, probed), _COLOUR_CELL_MAG / np.sqrt(12.0))[:, :, None]
        share = np.ones_like(offset)
        if self.completeness_in_colour:
            share = self.completeness.at(m, probed)[:, :, None]
        edges = offset[1] + scatter[1] * np.linspace(-3.0, 3.0, 25)
        below = share * ndtr((edges - offset) / scatter)
        return float(np.abs(below[1] - (below[0] + below[2]) / 2.0).max())


def _landed(first, last, scatter, edges) -> np.ndarray:
    landed = np.empty((first.size, edges.size - 1))
    land(first, last, scatter, edges, landed)
    return landed


def _gap(m_mag: np.ndarray, bright: float, faint: float, reason: str) -> str:
    if m_mag[0] <= bright + 1e-9 and m_mag[-1] >= faint - 1e-9:
        return ""
    return f"m from {m_mag[0]:g} to {m_mag[-1]:g}, but {reason} from {bright:.2f} to {faint:.2f}"
