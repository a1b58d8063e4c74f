"""What the fitted model says about the counts: expected and simulated counts of every field and bin, by draw."""

from dataclasses import dataclass

import numpy as np

from starcount.inference.target import Target

QUANTILES = (0.025, 0.16, 0.5, 0.84, 0.975)
KEPT_DRAWS = 200
MOST_NUMBERS = 20_000_000
"""Expected counts are kept for at most this many (draw, field, bin)."""


@dataclass(frozen=True, eq=False)
class GroupDraws:
    """A group's used bins: expected and simulated counts (draw, field, bin), nan where a bin is not used.

    ``chi2`` and ``chi2_simulated`` (draw,) are the Pearson discrepancies of the observed and of simulated counts;
    ``neighbour`` is the mean product of neighbouring bins' residuals, with its values for simulated counts.
    ``ln_likelihood`` is (draw, field).
    """

    name: str
    expected: np.ndarray
    simulated: np.ndarray
    ln_likelihood: np.ndarray
    chi2: np.ndarray
    chi2_simulated: np.ndarray
    neighbours: np.ndarray
    neighbours_simulated: np.ndarray

    @property
    def p_value(self) -> float:
        """Probability that simulated counts lie farther from the model than the observed ones do."""
        return float(np.mean(self.chi2_simulated > self.chi2) + 0.5 * np.mean(self.chi2_simulated == self.chi2))

    @property
    def neighbour(self) -> float:
        """Mean correlation of the residuals of neighbouring bins."""
        return float(np.mean(self.neighbours))

    @property
    def neighbour_p(self) -> float:
        """Probability that neighbouring bins of simulated counts agree more than those observed."""
        return float(np.mean(self.neighbours_simulated > self.neighbours))


def predictive_draws(target: Target, x: np.ndarray, groups: dict, seed: int) -> tuple[GroupDraws, ...]:
    """Return expected and simulated counts at draws ``x`` (draw, p); ``groups`` are the group models by name."""
    rng = np.random.default_rng(seed)
    means, spreads = zip(*(target.means(one) for one in x), strict=True)
    return tuple(
        _group(counts.name.removeprefix("counts."), counts.likelihood, groups, [m[i] for m in means],
               np.array([s[i] for s in spreads]), rng)
        for i, counts in enumerate(target.counts)
        if counts.name.removeprefix("counts.") in groups
    )  # fmt: skip


def thinned(x: np.ndarray, n_cell: int) -> np.ndarray:
    """Return evenly spaced draws of ``x`` (draw, p), few enough to keep the counts of ``n_cell`` bins for each."""
    most = max(20, min(KEPT_DRAWS, MOST_NUMBERS // n_cell))
    return x[np.unique(np.linspace(0, len(x) - 1, most).astype(int))]


def _group(name, likelihood, groups, means, spreads, rng) -> GroupDraws:
    used, counts = groups[name].used, groups[name].counts
    expected = np.full((len(means), *used.shape), np.nan)
    expected[:, used] = means
    simulated = np.full(expected.shape, np.nan)
    simulated[:, used] = [likelihood.draw(rng, mean, spread) for mean, spread in zip(means, spreads, strict=True)]
    variance = expected + spreads[:, None, None] * expected**2
    seen, drawn = ((n - expected) / np.sqrt(variance) for n in (counts, simulated))
    filled = np.where(used, expected, 1.0)
    terms = [likelihood.terms(counts.astype(float), used, e, d) for e, d in zip(filled, spreads, strict=True)]
    return GroupDraws(
        name=name,
        expected=expected,
        simulated=simulated,
        ln_likelihood=np.array([one[0] for one in terms]),
        chi2=np.nansum(seen**2, axis=(1, 2)),
        chi2_simulated=np.nansum(drawn**2, axis=(1, 2)),
        neighbours=_neighbours(seen),
        neighbours_simulated=_neighbours(drawn),
    )


def _neighbours(residuals: np.ndarray) -> np.ndarray:
    """The mean product of the residuals of neighbouring bins: (draw,); 0 where no two bins are neighbours."""
    products = residuals[:, :, 1:] * residuals[:, :, :-1]
    known = np.isfinite(products)
    return np.where(known, products, 0.0).sum(axis=(1, 2)) / np.maximum(known.sum(axis=(1, 2)), 1)
