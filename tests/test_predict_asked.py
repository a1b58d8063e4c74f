"""Prediction: what it is asked for, what it refuses, what it says on the way."""

from dataclasses import replace
from types import SimpleNamespace

import invented_prediction as invented
import numpy as np
import pytest

from starcount.errors import InputError
from starcount.predict import predict_counts


@pytest.fixture(scope="module")
def survey():
    return invented.survey()


@pytest.fixture(scope="module")
def model(survey):
    return invented.model(survey)


def test_progress_is_told_before_each_group_is_laid_out(survey, model):
    """Of two groups the second is laid out when the first is predicted, and its share is that of the groups done."""
    told = []

    def prepared():
        for name in ("first", "second"):
            told.append(name)
            yield model.groups[0]

    two = SimpleNamespace(
        survey=replace(survey, groups=tuple(replace(survey.groups[0], name=name) for name in ("a", "b"))),
        galaxy=model.galaxy,
        prepared=prepared,
    )
    predict_counts(two, progress=lambda what, share: told.append((what, share)))
    lines, doing = "laying out the sight lines of", "predicting"
    expected = [(f"{lines} a", 0.0), "first", (f"{doing} a", 0.4), (f"{lines} b", 0.5), "second", (f"{doing} b", 0.9)]
    assert told == expected


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ({"thin.amplitud": 1.0}, "no parameter called 'thin.amplitud'; known: halo.amplitude_pc3, thin.amplitude"),
        ({"thin.amplitude": -1.0}, "value of thin.amplitude: -1.0; expected a number from 0 to 10"),
        ({"thin.amplitude": np.nan}, "value of thin.amplitude: nan"),
        ({"thin.amplitude": "much"}, "value of thin.amplitude: 'much'"),
    ],
)
def test_values_that_no_parameter_takes_are_refused(model, values, message):
    """A misspelt name would otherwise change nothing, silently."""
    with pytest.raises(InputError, match=message):
        predict_counts(model, values=values)


def test_values_and_a_posterior_together_are_refused(model):
    """They would contradict each other."""
    with pytest.raises(InputError, match="expected one of them"):
        predict_counts(model, values={}, posterior=invented.posterior())
