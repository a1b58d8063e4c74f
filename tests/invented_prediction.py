"""A small invented sky with closed-form counts, for the tests of prediction and report. Nothing here is measured."""

import json
from dataclasses import dataclass
from types import SimpleNamespace

import numpy as np
import xarray as xr
from scipy import stats

from starcount.forward.knots import KNOTS_MAG
from starcount.posterior import FORMAT, Posterior
from starcount.survey import Group, Survey, circle_fields, make_group

EDGES_MAG = np.arange(10.0, 20.1, 1.0)
TRUTH = {"thin.amplitude": 1.0, "halo.amplitude_pc3": 1.0}
EDGES_COLOUR_MAG = np.array([-np.inf, *np.arange(0.2, 2.61, 0.3), np.inf])
RADIUS_DEG = 1.1284
"""Of a circle of 4 square degrees."""
CLASS_SHARES = {"dwarf": 0.9, "red giant": 0.1}
LAYERS = tuple((SimpleNamespace(name=name), None) for name in ("thin", "halo"))


@dataclass(frozen=True, eq=False)
class FakeGroupModel:
    """A disc and a halo whose counts are (parameter) x (known array): sums and ratios can be done by hand.

    Factors (layer, knot) scale the counts of their layer by their mean. Of every ten stars nine are dwarfs, one is a
    red giant.
    """

    group: Group
    disc: np.ndarray
    halo: np.ndarray
    outside: np.ndarray | None = None
    extra_names = ("galaxies",)
    galaxy = SimpleNamespace(layers=LAYERS)

    def expected(self, values, *, factors=None, parts=False):
        """Counts expected, shape (field, bin); one in every bin is no star of the Galaxy."""
        thin, halo = np.ones(2) if factors is None else factors.mean(axis=1)
        stars = {
            "thin disc": thin * values["thin.amplitude"] * self.disc,
            "halo": halo * values["halo.amplitude_pc3"] * self.halo,
        }
        galaxies = np.ones_like(self.disc)
        if parts == "class":
            split = {(name, kind): share * n for name, n in stars.items() for kind, share in CLASS_SHARES.items()}
            return {**split, ("galaxies", ""): galaxies}
        drawn = {**stars, "galaxies": galaxies}
        return drawn if parts else sum(drawn.values())


def group_model(group, outside=None):
    """The fake model of a group."""
    bins = group.bins
    middle = 0.5 * (bins.m_lo + bins.m_hi)
    sin_b = np.abs(np.sin(np.radians(group.fields.b_deg)))[:, None]
    disc = 400 * 10 ** (0.25 * (middle - 14)) / (0.15 + sin_b) * _colours(bins, 0.9 + 0.1 * (middle - 14), 0.45)
    halo = np.broadcast_to(40 * 10 ** (0.3 * (middle - 14)) * _colours(bins, 0.8, 0.2), disc.shape)
    return FakeGroupModel(group, disc, halo, None if outside is None else np.full(len(disc), outside))


def _colours(bins, mean_mag, sd_mag):
    """Share of each bin in a Gaussian distribution of colours; 1 where there is no colour."""
    if bins.colour is None:
        return 1.0
    return stats.norm.cdf(bins.c_hi, mean_mag, sd_mag) - stats.norm.cdf(bins.c_lo, mean_mag, sd_mag)


def survey(number=24, names=None, counts="drawn", used=None, seed=3, invented=True, edges_colour_mag=None):
    """Fields on a spiral over the whole sky; counts drawn from the fake model, one field a quarter too rich.

    ``counts``: 'drawn', None, or an array (field, bin). With edges of colour the bins are divided in BP - RP.
    """
    steps = (np.arange(number) + 0.5) / number
    names = [f"field {i:02d}" for i in range(number)] if names is None else names
    b_deg = np.degrees(np.arcsin(1 - 2 * steps))
    fields = circle_fields(names, (np.arange(number) * 137.508) % 360, b_deg, np.full(number, RADIUS_DEG))
    in_colour = {} if edges_colour_mag is None else {"colour": ("BP", "RP"), "edges_colour_mag": edges_colour_mag}
    group = make_group("all", "G", EDGES_MAG, fields, **in_colour)
    if isinstance(counts, str):
        truth = group_model(group).expected(TRUTH)
        truth[number // 3] *= 1.25
        counts = np.random.default_rng(seed).poisson(truth)
    group = make_group("all", "G", EDGES_MAG, fields, counts, used, **in_colour)
    return Survey("Invented", "An invented sky", invented, (group,))


def model(of_survey, outside=None):
    """The fake model of a survey; of each group a share of the stars may be ``outside`` verified ranges."""
    groups = tuple(group_model(group, outside) for group in of_survey.groups)
    parameters = {name: SimpleNamespace(lower=0.0, upper=10.0) for name in TRUTH}
    galaxy = SimpleNamespace(values=dict(TRUTH), parameters=parameters)
    return SimpleNamespace(survey=of_survey, galaxy=galaxy, groups=groups, prepared=lambda: iter(groups))


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
    knots = np.full((*shape, KNOTS_MAG.size), curve)
    return xr.Dataset({**variables, "curve.disc": (("chain", "draw", "knot_mag"), knots)}, {"knot_mag": KNOTS_MAG})


def _prior(name, error, value, unit):
    return {"name": name, "unit": unit, "prior": "normal", "median": value, "q16": value - error, "q84": value + error,
            "meaning": f"what {name} means", "reference": "invented"}  # fmt: skip
