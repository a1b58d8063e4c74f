"""The posterior, defined once: a PyMC model of a survey's counts and of the local census."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pymc as pm
import pytensor
import pytensor.tensor as pt

from starcount.errors import InputError, UnknownName
from starcount.galaxy.component import Parameter
from starcount.inference import curve, likelihoods, priors
from starcount.inference.op import ExpectedCounts, Kernels, Luminosity
from starcount.stars import M_EDGES_MAG
from starcount.survey import overlapping_fields

SURELY_STARS = 20.0
"""A field that should hold this many stars and holds none was not covered: chance would do that once in 10^8."""

FEWEST = 1e-12
"""Expected counts are at least this: beside many stars the splines of the projection may leave less than none."""

CENSUS = "census"
"""The group of the local census; its rows scatter by Poisson noise."""


def build_model(
    forward_model,
    parameters: Sequence[str] | None = None,
    *,
    likelihood: str = "negative-binomial",
    lf_curve: bool = True,
    census: bool = True,
    kernels: Kernels | None = None,
) -> pm.Model:
    """Return the PyMC model of ``parameters`` (all that can be fitted, by default) given the survey's counts.

    Each parameter is a standard normal ``u.NAME`` and, in its own unit, ``NAME``. Each group has one observed variable
    ``counts.GROUP`` over its used bins, in the order of ``flatnonzero(used)``. Geometry and counts are data of the
    model. ``kernels`` stands in for the compiled functions of the forward model.
    """
    if kernels is None:
        from starcount.forward import kernels
    scatter = likelihoods.find(likelihood)
    chosen = choose(forward_model.galaxy, parameters)
    groups = fitted_groups(forward_model, census)
    _check(forward_model, chosen, groups)
    components = tuple(component for component, _ in forward_model.galaxy.layers)
    with pm.Model(coords={curve.DIMENSION: curve.KNOTS_MAG}) as model:
        values = {p.name: priors.variable(p) for p in chosen}
        v = forward_model.galaxy.vector(values, xp=pt)
        found = curve.curves(components, M_EDGES_MAG) if lf_curve else ()
        factors, owner = (_factors(found), curve.owners(found, components)) if lf_curve else (None, None)
        for name, group in groups.items():
            law = likelihoods.find("poisson") if name == CENSUS else scatter
            floor = priors.variable(floor_of(name)) if law.HAS_FLOOR else None
            _observe(name, group, law, floor, _expected(name, group, v, factors, owner, kernels))
    return model


def choose(galaxy, parameters: Sequence[str] | None) -> tuple[Parameter, ...]:
    """Return the parameters of these names, or all that can be fitted; refuse unknown names and missing priors."""
    if parameters is None:
        return tuple(p for p in galaxy.parameters.values() if p.fittable and p.error > 0)
    for name in parameters:
        if name not in galaxy.parameters:
            raise UnknownName("parameter", name, tuple(galaxy.parameters))
    if len(set(parameters)) < len(parameters) or not parameters:
        raise InputError(f"parameters to fit: {list(parameters)}; expected at least one name, each once")
    chosen = tuple(galaxy.parameters[name] for name in parameters)
    for parameter in chosen:
        priors.check_prior(parameter)
    return chosen


def floor_of(group: str) -> Parameter:
    """The fractional error floor of a group's counts, beyond Poisson noise, and its prior."""
    return Parameter(
        name=f"floor.{group}",
        value=0.05,
        error=0.04,
        unit="",
        lower=1e-3,
        upper=1.0,
        prior="lognormal",
        reference="assumed: smooth models leave 2 to 11 % in a bin",
        meaning=f"scatter of the counts of group {group} beyond Poisson noise",
    )


def fitted_parameters(galaxy, parameters, groups: Sequence[str], likelihood: str) -> tuple[Parameter, ...]:
    """Return everything that has a prior table row: the chosen parameters, and a floor for each group that has one."""
    floors = [floor_of(name) for name in groups] if likelihoods.find(likelihood).HAS_FLOOR else []
    return (*choose(galaxy, parameters), *floors)


def fitted_groups(forward_model, census: bool) -> dict:
    """Return the group models whose counts are fitted, by name.

    Bins in which nothing was counted and the model can hold no star say nothing; they are set aside.
    """
    groups = {g.name: g for g in forward_model.groups}
    if census and CENSUS in groups:
        raise InputError(f"group name {CENSUS!r} is taken by the local census; expected another name")
    if census and forward_model.census is None:
        raise InputError(f"no component of Galaxy {forward_model.galaxy.name!r} is made of the census; fit without it")
    if census:
        groups[CENSUS] = forward_model.census
    return {name: _with_stars(group) for name, group in groups.items()}


def _with_stars(group):
    if group.counts is None or not group.used.any():
        raise InputError(f"group {group.name!r} holds no counts to fit; give it a counts table or leave it out")
    expected = group.expected({})
    none = group.used & (expected <= 0.0)
    impossible = np.argwhere(none & (group.counts > 0))
    if len(impossible):
        field, one = impossible[0]
        raise InputError(
            f"group {group.name!r}: {group.counts[field, one]} stars in {_field_name(group, field)}, bin {one + 1}, "
            f"where the model expects none (and {len(impossible) - 1} more such bins); leave these bins out"
        )
    seen, foreseen = (np.where(group.used, n, 0.0).sum(axis=1) for n in (group.counts, expected))
    empty = np.flatnonzero((seen == 0) & (foreseen > SURELY_STARS))
    if empty.size:
        raise InputError(
            f"group {group.name!r}: not one star in {_field_name(group, empty[0])}, where some "
            f"{foreseen[empty[0]]:.0f} are expected (and {empty.size - 1} more such fields); "
            "leave out fields that the catalogue does not cover"
        )
    return replace(group, used=group.used & ~none)


def _field_name(group, field: int) -> str:
    return f"field {field + 1}" if group.group is None else f"field {group.group.fields.name[field]}"


def _check(forward_model, chosen, groups) -> None:
    data = sum(int(group.used.sum()) for name, group in groups.items() if name != CENSUS)
    if data < len(chosen):
        raise InputError(f"{data} counts cannot fix {len(chosen)} parameters; expected at least as many counts")
    overlapping = overlapping_fields(forward_model.survey)
    if overlapping:
        first = " and ".join(f"{group}/{field}" for group, field in overlapping[0])
        raise InputError(f"fields overlap in the same bins: {first} (and {len(overlapping) - 1} more pairs)")


def _factors(found: Sequence[curve.Curve]):
    """The factors (1 + curve, knot) of the smooth curves on the luminosity functions; the first is 1 everywhere."""
    return pt.exp(pt.stack([pt.zeros(curve.KNOTS_MAG.size), *(c.variable() for c in found)]))


def _data(name: str, array: np.ndarray):
    """Add an array to the model's data as it is: ``pm.Data`` would cut whole numbers to 32 bits, and with them the
    addresses of the laws."""
    variable = pytensor.shared(np.ascontiguousarray(array), name=name)
    pm.modelcontext(None).register_data_var(variable)
    return variable


def _expected(name: str, group, v, factors, owner: np.ndarray | None, kernels: Kernels):
    """The counts expected of a group; ``owner`` (layer,) is the row of ``factors`` of each layer."""
    geometry = [_data(f"{name}.geometry{i}", a) for i, a in enumerate(group.projection.arrays)]
    if factors is None:
        W = _data(f"{name}.luminosity", group.luminosity_matrix())
    else:
        arrays = [_data(f"{name}.luminosity{i}", a) for i, a in enumerate(group.matrix.arrays(owner))]
        W = Luminosity(kernels)(factors, *arrays)
    ln_dust = _data(f"{name}.ln_dust", np.zeros(group.counts.shape[0]))
    expected = ExpectedCounts(kernels, fixed_luminosity=factors is None)(v, W, ln_dust, *geometry)
    expected = pt.maximum(expected, FEWEST)
    if len(group.extra):
        expected = expected + _data(f"{name}.extra", np.sum(group.extra, axis=0))
    return expected


def _observe(name: str, group, likelihood, floor, expected) -> None:
    cells = np.flatnonzero(group.used)
    dim = f"cell.{name}"
    pm.modelcontext(None).add_coord(dim, cells)
    counts = pm.Data(f"{name}.counts", group.counts.ravel()[cells], dims=dim)
    likelihood.observe(f"counts.{name}", expected.ravel()[_data(f"{name}.used", cells)], floor, counts, dim)
