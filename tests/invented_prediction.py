"""A small invented sky with closed-form counts, for the tests of prediction and report. Nothing here is measured."""

import json
from dataclasses import dataclass
from types import SimpleNamespace

import numpy as np
import xarray as xr

from starcount.posterior import FORMAT, Posterior
from starcount.stars import CLASSES, M_EDGES_MAG
from starcount.survey import Group, Survey, circle_fields, make_group

EDGES_MAG = np.arange(10.0, 20.1, 1.0)
TRUTH = {"thin.amplitude": 1.0, "halo.amplitude_pc3": 1.0}
RADIUS_DEG = 1.1284
"""Of a circle of 4 square degrees."""


@dataclass(frozen=True, eq=False)
class FakeGroupModel:
    """A disc and a halo whose counts are (parameter) x (known array): sums and ratios can be done by hand.

    A luminosity function ``lf`` (layer, class, cell) scales the counts of its layer by its mean.
    """

    group: Group
    disc: np.ndarray
    halo: np.ndarray
    lf: np.ndarray
    galaxy: SimpleNamespace
    extra_names = ("galaxies",)

    def expected(self, values, parts=False):
        """Counts expected, shape (field, bin); one in every bin is no star of the Galaxy."""
        thin, halo = self.lf.mean(axis=(1, 2))
        drawn = {
            "thin disc": thin * values["thin.amplitude"] * self.disc,
            "halo": halo * values["halo.amplitude_pc3"] * self.halo,
            "galaxies": np.ones_like(self.disc),
        }
        return drawn if parts else sum(drawn.values())


def group_model(group):
    """The fake model of a group."""
    middle = 0.5 * (group.edges_mag[1:] + group.edges_mag[:-1])
    sin_b = np.abs(np.sin(np.radians(group.fields.b_deg)))[:, None]
    disc = 400 * 10 ** (0.25 * (middle - 14)) / (0.15 + sin_b)
    halo = np.broadcast_to(40 * 10 ** (0.3 * (middle - 14)), disc.shape)
    galaxy = SimpleNamespace(layers=[(SimpleNamespace(name=name), None) for name in ("thin", "halo")])
    return FakeGroupModel(group, disc, halo, np.ones((2, len(CLASSES), M_EDGES_MAG.size - 1)), galaxy)


def survey(number=24, names=None, counts="drawn", used=None, seed=3, invented=True):
    """Fields on a spiral over the whole sky; counts drawn from the fake model, one field a quarter too rich.

    ``counts``: 'drawn', None, or an array (field, bin).
    """
    steps = (np.arange(number) + 0.5) / number
    names = [f"field {i:02d}" for i in range(number)] if names is None else names
    b_deg = np.degrees(np.arcsin(1 - 2 * steps))
    fields = circle_fields(names, (np.arange(number) * 137.508) % 360, b_deg, np.full(number, RADIUS_DEG))
    group = make_group("all", "G", EDGES_MAG, fields)
    if isinstance(counts, str):
        truth = group_model(group).expected(TRUTH)
        truth[number // 3] *= 1.25
        counts = np.random.default_rng(seed).poisson(truth)
    group = make_group("all", "G", EDGES_MAG, fields, counts, used)
    return Survey("Invented", "An invented sky", invented, (group,))


def model(of_survey):
    """The fake model of a survey."""
    galaxy = SimpleNamespace(values=dict(TRUTH))
    return SimpleNamespace(survey=of_survey, galaxy=galaxy, groups=tuple(map(group_model, of_survey.groups)))


def posterior(floor=0.05, certified=True, seed=1, size=400, curve=0.0):
    """Draws of the two amplitudes around the truth, 3 % wide, of the floor and of a luminosity-function curve.

    The halo's amplitude has a prior hardly wider than its draws. ``curve`` is the curve's height at all its knots.
    """
    rng = np.random.default_rng(seed)
    shape = (2, size // 2)
    widths = {"thin.amplitude": (0.3, 0.03), "halo.amplitude_pc3": (0.031, 0.03)}
    prior = {name: 1 + w[0] * rng.normal(size=(1, 1000)) for name, w in widths.items()}
    after = {name: 1 + w[1] * rng.normal(size=shape) for name, w in widths.items()}
    prior["floor.all"], after["floor.all"] = 0.05 * np.exp(rng.normal(size=(1, 1000))), np.full(shape, floor)
    after["floor.all"] = after["floor.all"] * np.exp(0.01 * rng.normal(size=shape))
    after["surface_density_pc2"] = 30 * after["thin.amplitude"]
    priors = [_prior(name, w[0], 1.0, "pc-3" if name.endswith("pc3") else "") for name, w in widths.items()]
    tree = xr.DataTree.from_dict({"posterior": _dataset(after, curve), "prior": _dataset(prior, 0.0)})
    tree.attrs.update(
        starcount_posterior=FORMAT,
        parameters=json.dumps(list(widths)),
        fitted=json.dumps([*widths, "floor.all"]),
        derived=json.dumps(["surface_density_pc2"]),
        curves=json.dumps({"disc": ["thin"]}),
        priors=json.dumps([*priors, _prior("floor.all", 0.04, 0.05, "")]),
        passed=int(certified),
        verdict="",
        checks=json.dumps(
            [
                {"name": "largest r-hat", "value": 1.004, "required": "at most 1.01", "passed": True},
                {"name": "smallest bulk ESS", "value": 812.0, "required": "at least 400", "passed": certified},
            ]
        ),
        warnings=json.dumps(["halo.amplitude_pc3: 97% of the prior's width is left"]),
    )
    return Posterior(tree)


def _dataset(columns, curve):
    variables = {name: (("chain", "draw"), values) for name, values in columns.items()}
    shape = next(iter(columns.values())).shape
    knots = np.full((*shape, 3), curve) + np.zeros(3)
    return xr.Dataset(
        {**variables, "curve.disc": (("chain", "draw", "knot_mag"), knots)}, {"knot_mag": [0.0, 5.0, 10.0]}
    )


def _prior(name, error, value, unit):
    return {"name": name, "unit": unit, "prior": "normal", "median": value, "q16": value - error, "q84": value + error,
            "meaning": f"what {name} means", "reference": "invented"}  # fmt: skip
