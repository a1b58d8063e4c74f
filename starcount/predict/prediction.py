"""What a prediction is: expected counts by group, compared with what was counted."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from astropy.table import QTable, vstack

from starcount.predict.empty_bins import caution_of_empty_bins
from starcount.tails import tail_probability

if TYPE_CHECKING:
    from starcount.survey import Group, Survey

OUTSIDE_SHARE = 0.01
"""A group is named in a caution when more of a field's stars than this rest on relations outside their range."""


@dataclass(frozen=True, eq=False)
class GroupPrediction:
    """The counts expected of one group, shape (field, bin); with a posterior also draws (draw, field, bin).

    ``parts`` holds one array per component and extra row, which sum to ``expected``; ``classes``, where it was asked
    for, one per (component, star class). ``draws`` are expected counts; ``counted`` are counts drawn around them, with
    Poisson noise and the fitted floor. ``floor`` is the fractional scatter of the counts beyond Poisson (0: none), one
    per draw. ``outside`` is the share of each field's stars (field,) whose magnitudes rest on relations outside the
    range that their sources verified; None where it is not known.
    """

    group: Group
    expected: np.ndarray
    parts: Mapping[str, np.ndarray]
    draws: np.ndarray | None = None
    counted: np.ndarray | None = None
    floor: np.ndarray | None = None
    classes: Mapping[tuple[str, str], np.ndarray] = field(default_factory=dict)
    outside: np.ndarray | None = None

    @property
    def compared(self) -> np.ndarray:
        """Which (field, bin) hold a count to compare with."""
        return self.group.used if self.group.counts is not None else np.zeros(self.expected.shape, bool)

    @property
    def n(self) -> np.ndarray:
        """The counts (field, bin); zeros where the group has none."""
        return np.zeros(self.expected.shape, np.int64) if self.group.counts is None else self.group.counts

    @property
    def own_variance(self) -> np.ndarray:
        """The variance of each (field, bin) that it shares with no other: Poisson's and the floor's."""
        if self.draws is None:
            return self.expected
        return self.expected + np.mean(self.floor[:, None, None] ** 2 * self.draws**2, axis=0)

    def each(self) -> Total:
        """Every (field, bin) for itself."""
        shared = 0.0 if self.draws is None else self.draws.var(axis=0)
        return Total(self.n, self.expected, self.own_variance + shared)

    def by_field(self) -> Total:
        """Sum over the bins that are compared with counts, (field,)."""
        n, expected, own = (
            np.where(self.compared, values, 0).sum(axis=1) for values in (self.n, self.expected, self.own_variance)
        )
        shared = 0.0 if self.draws is None else self.summed_draws().var(axis=0)
        return Total(n, expected, own + shared)

    def summed_draws(self) -> np.ndarray:
        """The draws summed over the bins that are compared with counts, (draw, field)."""
        return np.where(self.compared, self.draws, 0.0).sum(axis=2)


@dataclass(frozen=True, eq=False)
class Total:
    """Counts ``n``, their expectation and the variance of the prediction, with noise; any one shape."""

    n: np.ndarray
    expected: np.ndarray
    variance: np.ndarray

    @property
    def sd(self) -> np.ndarray:
        """Standard deviation of the prediction, noise included."""
        return np.sqrt(self.variance)

    @property
    def pull(self) -> np.ndarray:
        """(n - expected) / sd; not a number where nothing is expected."""
        return (self.n - self.expected) / np.where(self.sd > 0, self.sd, np.nan)

    @property
    def ln_ratio(self) -> np.ndarray:
        """ln(n / expected); not a number where either is zero."""
        good = (self.n > 0) & (self.expected > 0)
        return np.log(np.where(good, self.n, np.nan) / np.where(good, self.expected, np.nan))

    @property
    def tail(self) -> np.ndarray:
        """Probability of a count at least this far out, on both sides: see ``tail_probability``."""
        return tail_probability(self.n, self.expected, self.variance)


@dataclass(frozen=True, eq=False)
class Prediction:
    """Expected counts of a survey: by group as arrays, and as the tables that are written and shown.

    ``bins`` holds one table per group, a row per field and bin; ``fields`` a row per group and field. Cells
    without a count to compare with are masked. ``source`` says what was predicted from: 'values', 'posterior' or
    'uncertified draws'.
    """

    survey: Survey
    source: str
    groups: Mapping[str, GroupPrediction]
    bins: Mapping[str, QTable]
    fields: QTable

    def worst_fields(self, number: int = 5) -> QTable:
        """The fields whose totals are least probable, worst first."""
        return _least_probable(self.fields, number)

    def worst_bins(self, number: int = 5) -> QTable:
        """The bins whose counts are least probable over all groups, worst first.

        If any group has a colour, all rows have one: its name and the bin's limits, '' and not a number where the
        group has none.
        """
        coloured = any(group.group.colour for group in self.groups.values())
        tables = [self._worst_of(name, number, coloured) for name in self.bins]
        return _least_probable(vstack(tables, metadata_conflicts="silent"), number)

    def _worst_of(self, name: str, number: int, coloured: bool) -> QTable:
        group = self.groups[name].group
        limits = ["c_lo", "c_hi"] if group.colour else []
        columns = ["field", "m_lo", "m_hi", *limits, "n", "expected", "pull", "tail"]
        worst = _least_probable(self.bins[name][columns], number)
        worst.add_column(np.full(len(worst), name), name="group", index=0)
        if coloured:
            worst.add_column(np.full(len(worst), "-".join(group.colour or ())), name="colour", index=4)
            for i, limit in enumerate(["c_lo", "c_hi"] if not limits else []):
                worst.add_column(np.full(len(worst), np.nan) * worst["m_lo"].unit, name=limit, index=5 + i)
        return worst

    def cautions(self) -> list[str]:
        """What to know before using the numbers: bins without stars, groups of which more than a little is
        extrapolated."""
        extrapolated = (_caution_of_relations(name, group) for name, group in self.groups.items())
        without_stars = (caution_of_empty_bins(group.group, group.expected) for group in self.groups.values())
        return [*filter(None, [*without_stars, *extrapolated])]


def _caution_of_relations(name: str, group: GroupPrediction) -> str:
    """How much of a group's stars rests on relations outside their range, and in which field most; '' if little does.

    Field by field, so that one dense field does not hide the others.
    """
    if group.outside is None or not (group.outside > OUTSIDE_SHARE).any():
        return ""
    worst, stars = int(np.argmax(group.outside)), group.expected.sum(axis=1)
    return (
        f"group {name}: {100 * group.outside @ stars / stars.sum():.2g} % of the expected stars rest on magnitude "
        f"relations outside the range that their sources verified; most in field {group.group.fields.name[worst]}, "
        f"{100 * group.outside[worst]:.2g} %"
    )


def _least_probable(table: QTable, number: int) -> QTable:
    compared = table[~np.ma.getmaskarray(np.ma.asarray(table["tail"]))]
    order = np.lexsort((-np.abs(np.ma.filled(compared["pull"], 0.0)), np.ma.filled(compared["tail"], 1.0)))
    return compared[order[:number]]
