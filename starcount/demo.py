"""The demo: an invented survey whose counts are drawn, by seed, from a stated truth.

The survey without its counts and the truth are data of the package (``demo_survey/``).
"""

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, replace
from importlib import resources
from pathlib import Path

import numpy as np
from scipy import stats

from starcount.errors import Problem, Problems
from starcount.files import write_bytes
from starcount.forward import ForwardModel
from starcount.galaxy import read_galaxy
from starcount.survey import Group, Survey, read_survey, write_survey

SOURCE = resources.files("starcount") / "demo_survey"
TRUTH = "truth.toml"


@dataclass(frozen=True)
class Truth:
    """What invented counts were drawn from: a Galaxy, values that replace its own, seed, scatter beyond Poisson's."""

    galaxy: str
    values: Mapping[str, float]
    seed: int
    floor: float


def read_truth(folder: Path) -> Truth | None:
    """Return the truth that lies beside an invented survey, None where there is none."""
    path = folder / TRUTH
    if not path.is_file():
        return None
    try:
        return Truth(**tomllib.loads(path.read_text(encoding="utf-8")))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError, TypeError) as error:
        raise Problems(Problem(str(path), "", str(error), "galaxy, seed, floor and [values]")) from None


def write_demo(folder: Path) -> None:
    """Write the demo's survey with its counts and the truth to a folder; the same bytes every time."""
    with resources.as_file(SOURCE) as source:
        truth = read_truth(source)
        survey = read_survey(source)
        write_survey(drawn(survey, truth), folder)
        write_bytes(folder / TRUTH, (source / TRUTH).read_bytes())


def drawn(survey: Survey, truth: Truth) -> Survey:
    """Return the survey with counts drawn from the truth."""
    model = ForwardModel(survey, read_galaxy(truth.galaxy))
    values = {**model.galaxy.values, **truth.values}
    rng = np.random.Generator(np.random.PCG64(truth.seed))
    return replace(survey, groups=tuple(_with_counts(part, values, truth, rng) for part in model.groups))


def _with_counts(part, values: Mapping[str, float], truth: Truth, rng: np.random.Generator) -> Group:
    expected = part.expected(values)
    # One uniform number a count, through the inverse of the distribution: a last digit of the expectation changes no
    # count, and the counts do not depend on how a library turns random bits into a Poisson number.
    share = rng.random(expected.shape)
    if truth.floor:
        size = truth.floor**-2
        counts = stats.nbinom.ppf(share, size, size / (size + expected))
    else:
        counts = stats.poisson.ppf(share, expected)
    return replace(part.group, counts=counts.astype(np.int64), used=np.ones(expected.shape, bool))
