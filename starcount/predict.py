"""Predicted counts: what the model expects in every field and bin, and how far the counts are from it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from astropy import units as u
from astropy.table import MaskedColumn, QTable, vstack

from starcount.errors import InputError
from starcount.tails import tail_probability

if TYPE_CHECKING:
    from starcount.forward import ForwardModel
    from starcount.posterior import Posterior
    from starcount.survey import Group, Survey

QUANTILES_PERCENT = (2.5, 16, 50, 84, 97.5)
"""Of expected and of predicted counts: the median and the central 68 and 95 % intervals, equal-tailed."""

SPLIT_DRAWS = 25
"""So many draws of a posterior are split into components."""


@dataclass(frozen=True, eq=False)
class GroupPrediction:
    """The counts expected of one group, shape (field, bin); with a posterior also draws (draw, field, bin).

    ``parts`` holds one array per component and extra row, which sum to ``expected``. ``draws`` are expected
    counts; ``counted`` are counts drawn around them, with Poisson noise and the fitted floor. ``floor`` is the
    fractional scatter of the counts beyond Poisson (0: none), one per draw.
    """

    group: Group
    expected: np.ndarray
    parts: Mapping[str, np.ndarray]
    draws: np.ndarray | None = None
    counted: np.ndarray | None = None
    floor: np.ndarray | None = None

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
        """The bins whose counts are least probable over all groups, worst first."""
        columns = ["field", "m_lo", "m_hi", "n", "expected", "pull", "tail"]
        tables = []
        for name, table in self.bins.items():
            worst = _least_probable(table[columns], number)
            worst.add_column(np.full(len(worst), name), name="group", index=0)
            tables.append(worst)
        return _least_probable(vstack(tables, metadata_conflicts="silent"), number)


def _least_probable(table: QTable, number: int) -> QTable:
    compared = table[~np.ma.getmaskarray(np.ma.asarray(table["tail"]))]
    order = np.lexsort((-np.abs(np.ma.filled(compared["pull"], 0.0)), np.ma.filled(compared["tail"], 1.0)))
    return compared[order[:number]]


def predict_counts(
    model: ForwardModel,
    values: Mapping[str, float] | None = None,
    posterior: Posterior | None = None,
    seed: int = 0,
    draws: int = 200,
) -> Prediction:
    """Predict the counts of every field and bin of the model's survey.

    With neither ``values`` nor ``posterior`` the Galaxy's own values are used; ``values`` replace those they name.
    With a posterior, ``draws`` of its samples (evenly spaced) are predicted; ``expected`` is then their mean, and
    the quantiles of the expectation and of noisy counts come with it. ``seed`` starts the noise, field by field
    from the field's name, so that a field more or less changes no other.
    """
    if values is not None and posterior is not None:
        raise InputError("predict_counts: both values and a posterior given; expected one of them")
    if posterior is None:
        values, source = {**model.galaxy.values, **(values or {})}, "values"
        groups = [_from_values(part, values) for part in model.groups]
    else:
        source = "posterior" if posterior.certified else "uncertified draws"
        chosen = np.unique(np.linspace(0, posterior.size - 1, draws).astype(int))
        groups = [_group_draws(part, posterior, chosen, seed) for part in model.groups]
    return as_prediction(model.survey, {prediction.group.name: prediction for prediction in groups}, source)


def as_prediction(survey: Survey, groups: Mapping[str, GroupPrediction], source: str) -> Prediction:
    """Put the tables of a prediction together."""
    bins = {name: _bin_table(prediction) for name, prediction in groups.items()}
    fields = vstack([_field_table(prediction) for prediction in groups.values()], metadata_conflicts="silent")
    return Prediction(survey, source, groups, bins, fields)


def _from_values(part, values) -> GroupPrediction:
    parts = part.expected(values, parts=True)
    return GroupPrediction(part.group, sum(parts.values()), parts)


def _group_draws(part, posterior, chosen, seed) -> GroupPrediction:
    expected = np.array([_at_draw(part, posterior, index) for index in chosen])
    floor = posterior.floor(part.group.name)[chosen]
    counted = draw_counts(expected, floor, part.group.fields.name, seed)
    mean = expected.mean(axis=0)
    return GroupPrediction(part.group, mean, _mean_parts(part, posterior, chosen, mean), expected, counted, floor)


def _at_draw(part, posterior, index: int, parts: bool = False):
    components = [component.name for component, _ in part.galaxy.layers]
    lf = posterior.luminosity_function(part.lf, components, int(index))
    return replace(part, lf=lf).expected(posterior.values(int(index)), parts=parts)


def _mean_parts(part, posterior, chosen, mean: np.ndarray) -> dict[str, np.ndarray]:
    """The mean by component and extra row, summing to ``mean`` (field, bin).

    Splitting a draw costs as much as predicting it once for each component, so the components' shares are taken from a
    few draws; extra rows are the same in all.
    """
    few = chosen[:: max(1, chosen.size // SPLIT_DRAWS)]
    split = [_at_draw(part, posterior, index, parts=True) for index in few]
    parts = {name: np.mean([one[name] for one in split], axis=0) for name in split[0]}
    fixed = sum(parts[name] for name in part.extra_names)
    stars = sum(counts for name, counts in parts.items() if name not in part.extra_names)
    scale = (mean - fixed) / np.where(stars > 0, stars, 1.0)
    return {name: counts * (1.0 if name in part.extra_names else scale) for name, counts in parts.items()}


def draw_counts(expected: np.ndarray, floor: np.ndarray, field_names, seed: int) -> np.ndarray:
    """Counts drawn around ``expected`` (draw, field, bin): Poisson, widened by the fractional ``floor`` (draw,)."""
    counted = np.empty(expected.shape, np.int64)
    shape = np.where(floor > 0, floor, 1.0) ** -2.0
    for f, name in enumerate(field_names):
        rng = np.random.default_rng([seed, *str(name).encode()])
        factor = rng.gamma(shape[:, None], 1 / shape[:, None], expected[:, f].shape)
        counted[:, f] = rng.poisson(expected[:, f] * np.where(floor[:, None] > 0, factor, 1.0))
    return counted


def _bin_table(prediction: GroupPrediction) -> QTable:
    group, edges = prediction.group, prediction.group.edges_mag
    n_field, n_bin = prediction.expected.shape
    each, hidden = prediction.each(), ~prediction.compared.ravel()
    table = QTable()
    table["field"] = np.repeat(group.fields.name, n_bin)
    table["m_lo"] = np.tile(edges[:-1], n_field) * u.mag
    table["m_hi"] = np.tile(edges[1:], n_field) * u.mag
    table["n"] = MaskedColumn(each.n.ravel().astype(np.int64), mask=hidden, description="stars counted")
    table["expected"] = prediction.expected.ravel()
    for name, counts in prediction.parts.items():
        table[name] = counts.ravel()
    if prediction.draws is not None:
        _add_quantiles(table, "expected", prediction.draws)
        _add_quantiles(table, "predicted", prediction.counted)
    _add_comparison(table, each, hidden)
    table.meta.update(group=group.name, band=group.band, bins="closed at m_lo, open at m_hi")
    return table


def _add_quantiles(table: QTable, name: str, draws: np.ndarray, hidden: np.ndarray | None = None) -> None:
    for percent, values in zip(QUANTILES_PERCENT, np.percentile(draws, QUANTILES_PERCENT, axis=0), strict=True):
        table[f"{name}_{percent:g}"] = values.ravel() if hidden is None else MaskedColumn(values, mask=hidden)


def _add_comparison(table: QTable, total: Total, hidden: np.ndarray) -> None:
    for name, values, meaning in (
        ("ln_ratio", total.ln_ratio, "ln(n / expected)"),
        ("sd", total.sd, "standard deviation of the predicted count, noise included"),
        ("pull", total.pull, "(n - expected) / sd"),
        ("tail", total.tail, "probability of a count at least this far out, both sides"),
    ):
        values = values.ravel()
        table[name] = MaskedColumn(values, mask=hidden | ~np.isfinite(values), description=meaning)


def _field_table(prediction: GroupPrediction) -> QTable:
    group, compared = prediction.group, prediction.compared
    total, hidden = prediction.by_field(), ~compared.any(axis=1)
    fields = group.fields
    table = QTable()
    table["group"] = np.full(len(fields.name), group.name)
    table["field"] = fields.name
    table["l"], table["b"] = fields.l_deg * u.deg, fields.b_deg * u.deg
    table["area"] = fields.area_deg2 * u.deg**2
    table["expected_all"] = prediction.expected.sum(axis=1)
    table["n"] = MaskedColumn(total.n.astype(np.int64), mask=hidden, description="stars counted, bins used")
    table["expected"] = MaskedColumn(total.expected, mask=hidden, description="in the bins used")
    if prediction.draws is not None:
        _add_quantiles(table, "expected", prediction.summed_draws(), hidden)
    _add_comparison(table, total, hidden)
    return table
