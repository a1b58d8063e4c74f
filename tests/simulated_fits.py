"""Simulated surveys of the default Galaxy, and fits of them without sampling: the mode and the information there."""

from collections.abc import Iterable
from dataclasses import dataclass, replace
from types import SimpleNamespace

import numpy as np

from starcount.forward import FIT_ACCURACY, ForwardModel
from starcount.galaxy import read_galaxy
from starcount.inference import likelihoods, model
from starcount.inference.mode import find_mode
from starcount.inference.target import Target
from starcount.survey import Survey, circle_fields, make_group

FIELDS = circle_fields(
    [f"f{i}" for i in range(8)],
    [0, 60, 120, 180, 240, 300, 30, 210],
    [35, -42, 50, -33, 38, -60, 80, -75],
    np.full(8, 2.5),
)
"""Eight fields of 20 square degrees at |b| > 30."""

EDGES_MAG = np.arange(14.0, 21.1, 0.5)


PARAMETERS = (
    "census.density_pc3",
    "thin.h_R_kpc",
    "thin.h_z_kpc",
    "thick.h_R_kpc",
    "thick.h_z_kpc",
    "thick.share",
    "halo.share",
    "halo.gamma",
    "halo.q",
)


@dataclass(frozen=True, eq=False)
class Found:
    """Values and errors by name at one point of a posterior, and the correlations (parameter, parameter)."""

    values: dict[str, float]
    errors: dict[str, float]
    correlations: np.ndarray

    def pull(self, name: str, truth: float) -> float:
        """How many errors a value lies above a truth."""
        return (self.values[name] - truth) / self.errors[name]


def prepared(band: str, colour=None, edges_colour_mag=None) -> SimpleNamespace:
    """The forward model of the fields in one band, with the census of its reference band; no counts yet."""
    group = make_group(band, band, EDGES_MAG, FIELDS, colour=colour, edges_colour_mag=edges_colour_mag)
    forward = ForwardModel(Survey("simulated", "", True, (group,)), read_galaxy(), FIT_ACCURACY)
    return SimpleNamespace(survey=forward.survey, galaxy=forward.galaxy, groups=forward.groups, census=forward.census)


def with_counts(forward: SimpleNamespace, counts: np.ndarray) -> SimpleNamespace:
    """The same forward model, given counts (field, bin)."""
    groups = (replace(forward.groups[0], counts=counts),)
    return SimpleNamespace(**{**vars(forward), "groups": groups})


def draw(expected: np.ndarray, seed: int, floor: float = 0.0) -> np.ndarray:
    """Counts that scatter by Poisson noise about a mean that itself scatters by the ``floor`` from bin to bin."""
    law = likelihoods.find("negative-binomial" if floor else "poisson")
    return law.draw(np.random.default_rng(seed), expected, floor**2)


def target(forward: SimpleNamespace, **settings) -> Target:
    """The posterior of ``PARAMETERS``; ``settings`` as for ``build_model``."""
    return Target(model.build_model(forward, PARAMETERS, **settings))


def fit(forward: SimpleNamespace, **settings) -> Found:
    """Values at the mode, climbed to from the priors' medians, and the errors that the information there gives."""
    posterior = target(forward, **settings)
    return at(posterior, find_mode(posterior, seed=1, starts=1).x)


def fit_each(forward: SimpleNamespace, skies: Iterable[np.ndarray], **settings) -> list[Found]:
    """Fits of many skies (field, bin) without the census: the model is put together once, the counts exchanged."""
    found, posterior = [], None
    for counts in skies:
        if posterior is None:
            posterior = target(with_counts(forward, counts), census=False, **settings)
        posterior.observed = (counts.ravel().astype(float),)  # one group, every bin used
        found.append(at(posterior, find_mode(posterior, seed=1, starts=1).x))
    return found


def at(posterior: Target, x: np.ndarray) -> Found:
    """Values and errors of the parameters at one point of a posterior."""
    J = posterior.jacobian(x)
    return _found(posterior, x, J.T @ J)


def foreseen(forward: SimpleNamespace, floor: float) -> Found:
    """What counts alone would find at the Galaxy's own values, which have no say in it: no priors, no census.

    Poisson noise and a known ``floor``, functions known.
    """
    expected = forward.groups[0].expected()
    posterior = target(
        with_counts(forward, np.round(expected).astype(int)), census=False, lf_curve=False, likelihood="poisson"
    )
    rows = posterior.jacobian(posterior.x0)[: expected.size] / np.sqrt(1.0 + floor**2 * expected.ravel())[:, None]
    return _found(posterior, posterior.x0, rows.T @ rows)


def _found(posterior: Target, x: np.ndarray, information: np.ndarray) -> Found:
    here, step = posterior.named(x), 1e-4
    slopes = np.zeros((len(PARAMETERS), x.size))
    for i, h in enumerate(step * np.eye(x.size)):
        there = posterior.named(x + h)
        slopes[:, i] = [(there[name] - here[name]) / step for name in PARAMETERS]
    covariance = slopes @ np.linalg.inv(information) @ slopes.T
    error = np.sqrt(np.diag(covariance))
    return Found(
        values={name: float(here[name]) for name in PARAMETERS},
        errors=dict(zip(PARAMETERS, error.tolist(), strict=True)),
        correlations=covariance / np.outer(error, error),
    )
