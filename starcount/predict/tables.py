"""The tables of a prediction: a row per field and bin, and a row per field."""

from __future__ import annotations

import numpy as np
from astropy import units as u
from astropy.table import MaskedColumn, QTable

from starcount.predict.prediction import GroupPrediction, Total

QUANTILES_PERCENT = (2.5, 16, 50, 84, 97.5)
"""Of expected and of predicted counts: the median and the central 68 and 95 % intervals, equal-tailed."""


def bin_table(prediction: GroupPrediction) -> QTable:
    """A row per field and bin. Colours go from c_lo to c_hi, which are infinite where a bin is open.

    Classes that hold no star in any field and bin have no column.
    """
    group = prediction.group
    each, hidden = prediction.each(), ~prediction.compared.ravel()
    table = QTable()
    table["field"] = np.repeat(group.fields.name, group.n_bin)
    for name in ("m_lo", "m_hi", *(("c_lo", "c_hi") if group.colour else ())):
        table[name] = np.tile(getattr(group.bins, name), len(group.fields.name)) * u.mag
    table["n"] = MaskedColumn(each.n.ravel().astype(np.int64), mask=hidden, description="stars counted")
    table["expected"] = prediction.expected.ravel()
    for name, counts in prediction.parts.items():
        table[name] = counts.ravel()
    for (component, star_class), counts in prediction.classes.items():
        if counts.any():
            table[f"{component} {star_class}"] = counts.ravel()
    if prediction.draws is not None:
        _add_quantiles(table, "expected", prediction.draws)
        _add_quantiles(table, "predicted", prediction.counted)
        table.meta["draws"] = len(prediction.draws)
    _add_comparison(table, each, hidden)
    closed = "closed at m_lo, open at m_hi"
    table.meta.update(group=group.name, band=group.band, bins=closed)
    if group.colour:
        table.meta.update(colour=list(group.colour), bins=f"{closed}; closed at c_lo, open at c_hi")
    return table


def field_table(prediction: GroupPrediction) -> QTable:
    """A row per field, its bins added up."""
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
