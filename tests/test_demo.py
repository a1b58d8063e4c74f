"""The demo: committed files equal to what the package makes, counts that follow the stated truth, a page at the end."""

import json
from pathlib import Path

import numpy as np
import pytest
from scipy import stats

from starcount import steps
from starcount.cli import main
from starcount.demo import read_truth, write_demo
from starcount.errors import Problems
from starcount.forward import ForwardModel
from starcount.galaxy import read_galaxy
from starcount.report import page
from starcount.survey import read_survey

COMMITTED = Path(__file__).parents[1] / "fields" / "demo"


@pytest.fixture
def in_empty_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_the_committed_survey_is_what_the_package_makes(tmp_path):
    """Same files, same bytes: the demo of the repository and that of an installed package are one."""
    write_demo(tmp_path / "demo")
    made = {path.name: path.read_bytes() for path in (tmp_path / "demo").iterdir()}
    assert made == {path.name: path.read_bytes() for path in COMMITTED.iterdir()}


def test_the_survey_says_that_it_is_invented():
    """About two dozen fields, in two groups with different bands and bins, circles and pixels among them."""
    survey = read_survey(COMMITTED)
    assert survey.invented
    assert sum(len(group.fields) for group in survey.groups) == 24
    assert {group.band for group in survey.groups} == {"G", "V"}
    assert len({group.edges_mag.size for group in survey.groups}) == 2
    assert 0 < survey.groups[0].fields.is_pixel.sum() < len(survey.groups[0].fields)


def test_the_counts_follow_the_truth():
    """Counts are a fair sample of the truth: chi-square over all bins, and its stated scatter is needed for it.

    With some 480 bins the sum of squared pulls has a relative standard deviation of sqrt(2/480) = 6.5 %; three of them.
    """
    truth, survey = read_truth(COMMITTED), read_survey(COMMITTED)
    model = ForwardModel(survey, read_galaxy(truth.galaxy))
    squares, poisson, bins = 0.0, 0.0, 0
    for part in model.groups:
        expected = part.expected({**model.galaxy.values, **truth.values})
        off = (part.counts - expected) ** 2
        squares += float((off / (expected + (truth.floor * expected) ** 2)).sum())
        poisson += float((off / expected).sum())
        bins += expected.size
    assert squares / bins == pytest.approx(1.0, abs=3 * np.sqrt(2 / bins))
    assert poisson / bins > 1 + 3 * np.sqrt(2 / bins)


def test_every_true_value_is_plausible_under_its_prior():
    """The truth lies within two prior widths: the demo shows a fit, not a surprise."""
    truth = read_truth(COMMITTED)
    parameters = read_galaxy(truth.galaxy).parameters
    for name, value in truth.values.items():
        assert abs(value - parameters[name].value) < 2 * parameters[name].error


def test_a_truth_that_is_no_truth_is_named(tmp_path):
    """A broken truth.toml is one line with its path."""
    (tmp_path / "truth.toml").write_text("galaxy = 'default'\n")
    with pytest.raises(Problems, match=r"truth\.toml: .*expected galaxy, seed, floor"):
        read_truth(tmp_path)


def test_quick_demo_from_an_empty_folder(in_empty_folder, capsys):
    """Survey, prediction from the truth, figures and page; JSON alone on standard output."""
    assert main(["demo", "--quick", "--json"]) == 0
    record = json.loads(capsys.readouterr().out)
    assert (in_empty_folder / record["page"]).is_file()
    assert (in_empty_folder / "fields" / "demo" / "survey.toml").is_file()
    assert sorted(record["result"]["groups"]) == ["visual", "wide"]
    for group in record["result"]["groups"].values():
        assert group["counted"] == pytest.approx(group["expected_of_counted"], rel=0.03)
    assert json.loads(Path(record["folder"], "run.json").read_text())["provenance"]["version"]


def test_an_existing_demo_survey_is_left_alone(in_empty_folder, monkeypatch):
    """Whoever has edited fields/demo sees a page of what they edited."""
    monkeypatch.setattr(page, "FIGURES", {})
    write_demo(Path("fields") / "demo")
    note = Path("fields") / "demo" / "survey.toml"
    note.write_text(note.read_text().replace("Larkspur demo survey", "edited by hand"))
    done = steps.demo(quick=True)
    assert done.prediction.survey.name == "edited by hand"
    assert "edited by hand" in note.read_text()


@pytest.mark.slow
def test_the_demo_recovers_its_truth(in_empty_folder):
    """The whole job: the fit passes its checks, and recovers what the counts were drawn from.

    The sum of squared pulls of the parameters stays below the 99.9 % point of chi-square: shared draws make the pulls
    depend on one another, which widens the sum, and the priors narrow it.
    """
    done = steps.demo()
    assert done.posterior.certified, done.posterior.verdict
    truth = read_truth(COMMITTED)
    pulls = []
    for name, value in truth.values.items():
        draws = done.posterior.draws(name)
        pulls.append((np.mean(draws) - value) / np.std(draws))
    assert np.square(pulls).sum() < stats.chi2.ppf(0.999, len(pulls))
    assert Path(done.record["page"]).is_file()
