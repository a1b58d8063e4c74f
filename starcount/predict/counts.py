"""From a model to a prediction: at given values, or at draws of a posterior."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from numbers import Real
from typing import TYPE_CHECKING

import numpy as np
from astropy.table import vstack

from starcount.errors import InputError, UnknownName
from starcount.predict.prediction import GroupPrediction, Prediction
from starcount.predict.tables import bin_table, field_table

if TYPE_CHECKING:
    from starcount.forward import ForwardModel
    from starcount.galaxy import Parameter
    from starcount.posterior import Posterior
    from starcount.survey import Survey

SPLIT_DRAWS = 25
"""So many draws of a posterior are split into components."""

_LAID_OUT = 0.8
"""About so much of a group's time goes into its sight lines, where its model is new."""

MOST_NUMBERS, FEWEST_DRAWS = 50_000_000, 50
"""Of a group with many bins fewer draws are predicted, down to this number: (draw, field, bin) must fit in memory."""


def predict_counts(
    model: ForwardModel,
    values: Mapping[str, float] | None = None,
    posterior: Posterior | None = None,
    seed: int = 0,
    draws: int = 200,
    classes: bool = False,
    progress: Callable[[str, float], None] = lambda what, share: None,
) -> Prediction:
    """Predict the counts of every field and bin of the model's survey.

    With neither ``values`` nor ``posterior`` the Galaxy's own values are used; ``values`` replace those they name.
    With a posterior, ``draws`` of its samples (evenly spaced) are predicted, fewer of groups with more than a quarter
    of a million bins; ``expected`` is then their mean, and the quantiles of the expectation and of noisy counts come
    with it; the tables say how many they were. ``seed`` starts the noise, field by field
    from the field's name, so that a field more or less changes no other. ``classes`` splits the components by star
    class too. ``progress(what, share)`` is told which group is at work.

    Raises ``UnknownName`` for a value that the Galaxy has not, ``InputError`` for one outside its parameter's range.
    """
    if values is not None and posterior is not None:
        raise InputError("predict_counts: both values and a posterior given; expected one of them")
    if posterior is None:
        values, source = {**model.galaxy.values, **_checked(values or {}, model.galaxy.parameters)}, "values"
    else:
        source = "posterior" if posterior.certified else "uncertified draws"
    groups, number = {}, len(model.survey.groups)
    prepared = model.prepared()
    for i, group in enumerate(model.survey.groups):
        progress(f"laying out the sight lines of {group.name}", i / number)
        part = next(prepared)
        progress(f"predicting {group.name}", (i + _LAID_OUT) / number)
        groups[group.name] = (
            _from_values(part, values, classes) if posterior is None
            else _from_draws(part, posterior, draws, seed, classes)
        )  # fmt: skip
    return as_prediction(model.survey, groups, source)


def _checked(values: Mapping[str, float], parameters: Mapping[str, Parameter]) -> Mapping[str, float]:
    """Refuse values that name no parameter or that its law does not take."""
    for name, value in values.items():
        if name not in parameters:
            raise UnknownName("parameter", name, tuple(parameters))
        p = parameters[name]
        if not (isinstance(value, Real) and p.lower <= value <= p.upper):
            raise InputError(f"value of {name}: {value!r}; expected a number from {p.lower:g} to {p.upper:g}")
    return values


def as_prediction(survey: Survey, groups: Mapping[str, GroupPrediction], source: str) -> Prediction:
    """Put the tables of a prediction together."""
    bins = {name: bin_table(prediction) for name, prediction in groups.items()}
    fields = vstack([field_table(prediction) for prediction in groups.values()], metadata_conflicts="silent")
    return Prediction(survey, source, groups, bins, fields)


def _from_values(part, values, classes: bool) -> GroupPrediction:
    parts = part.expected(values, parts=True)
    split = _of_stars(part.expected(values, parts="class")) if classes else {}
    return GroupPrediction(part.group, sum(parts.values()), parts, classes=split, outside=part.outside)


def _from_draws(part, posterior, draws: int, seed: int, classes: bool) -> GroupPrediction:
    most = max(FEWEST_DRAWS, MOST_NUMBERS // part.group.used.size)
    chosen = np.unique(np.linspace(0, posterior.size - 1, min(draws, most)).astype(int))
    expected = np.array([posterior.at_draw(part, int(index)) for index in chosen])
    floor = posterior.floor(part.group.name)[chosen]
    mean = expected.mean(axis=0)
    # Splitting a draw costs as much as predicting it once for each part, so the shares are taken from a few draws.
    few = chosen[:: max(1, chosen.size // SPLIT_DRAWS)]
    parts = _mean_parts(part, posterior, few, mean)
    return GroupPrediction(
        group=part.group,
        expected=mean,
        parts=parts,
        draws=expected,
        counted=draw_counts(expected, floor, part.group.fields.name, seed),
        floor=floor,
        classes=_mean_classes(part, posterior, few, parts) if classes else {},
        outside=part.outside,
    )


def _mean_of(part, posterior, few, parts: bool | str) -> dict:
    split = [posterior.at_draw(part, int(index), parts) for index in few]
    return {name: np.mean([one[name] for one in split], axis=0) for name in split[0]}


def _mean_parts(part, posterior, few, mean: np.ndarray) -> dict[str, np.ndarray]:
    """The mean by component and extra row, summing to ``mean`` (field, bin); extra rows are the same in all draws."""
    parts = _mean_of(part, posterior, few, True)
    fixed = sum(parts[name] for name in part.extra_names)
    stars = sum(counts for name, counts in parts.items() if name not in part.extra_names)
    scale = (mean - fixed) / np.where(stars > 0, stars, 1.0)
    return {name: counts * (1.0 if name in part.extra_names else scale) for name, counts in parts.items()}


def _mean_classes(part, posterior, few, parts: Mapping[str, np.ndarray]) -> dict[tuple[str, str], np.ndarray]:
    """The mean by (component, star class); the classes of a component sum to its part."""
    split = _of_stars(_mean_of(part, posterior, few, "class"))
    scale = {}
    for name in {component for component, _ in split}:
        stars = sum(counts for (component, _), counts in split.items() if component == name)
        scale[name] = parts[name] / np.where(stars > 0, stars, 1.0)
    return {key: counts * scale[key[0]] for key, counts in split.items()}


def _of_stars(split: Mapping[tuple[str, str], np.ndarray]) -> dict[tuple[str, str], np.ndarray]:
    """Leave out the extra rows, whose class is ''."""
    return {key: counts for key, counts in split.items() if key[1]}


def draw_counts(expected: np.ndarray, floor: np.ndarray, field_names, seed: int) -> np.ndarray:
    """Counts drawn around ``expected`` (draw, field, bin): Poisson, widened by the fractional ``floor`` (draw,)."""
    counted = np.empty(expected.shape, np.int64)
    shape = np.where(floor > 0, floor, 1.0) ** -2.0
    for f, name in enumerate(field_names):
        rng = np.random.default_rng([seed, *str(name).encode()])
        factor = rng.gamma(shape[:, None], 1 / shape[:, None], expected[:, f].shape)
        counted[:, f] = rng.poisson(expected[:, f] * np.where(floor[:, None] > 0, factor, 1.0))
    return counted
