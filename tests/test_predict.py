"""Prediction: sums, pulls, tails, quantiles and tables, against closed forms and hand-made numbers."""

from dataclasses import replace
from types import SimpleNamespace

import invented_prediction as invented
import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from starcount.predict import as_prediction, counts, draw_counts, predict_counts
from starcount.predict.empty_bins import caution_of_empty_bins
from starcount.tails import tail_probability


@pytest.fixture(scope="module")
def survey():
    return invented.survey()


@pytest.fixture(scope="module")
def model(survey):
    return invented.model(survey)


@pytest.fixture(scope="module")
def from_posterior(model):
    return predict_counts(model, posterior=invented.posterior(floor=0.05), draws=200)


def test_components_sum_to_the_expectation_and_scale_with_their_values(model):
    """The fake Galaxy is linear, so doubling the halo doubles its column and no other; 1e-12 is rounding."""
    table = predict_counts(model, values={"halo.amplitude_pc3": 2.0}).bins["all"]
    part = model.groups[0]
    assert_allclose(table["halo"], 2 * np.broadcast_to(part.halo, part.disc.shape).ravel(), rtol=1e-12)
    assert_allclose(table["thin disc"], part.disc.ravel(), rtol=1e-12)
    assert_allclose(table["expected"], table["halo"] + table["thin disc"] + 1.0, rtol=1e-12)


def test_rows_are_fields_times_bins_in_order_with_units(model, survey):
    """A row's field, edges and count are those of the arrays it came from."""
    table = predict_counts(model).bins["all"]
    group = survey.groups[0]
    row = table[3 * 10 + 7]
    assert (row["field"], row["m_lo"].to_value("mag"), row["m_hi"].to_value("mag")) == ("field 03", 17.0, 18.0)
    assert row["n"] == group.counts[3, 7]
    assert len(table) == 24 * 10


def test_pull_is_in_units_of_the_root_of_the_expectation(model, survey):
    """With given values the only noise is Poisson's: pull = (n - mu) / sqrt(mu), for bins and for field totals."""
    prediction = predict_counts(model)
    mu, n = model.groups[0].expected(model.galaxy.values), survey.groups[0].counts
    assert_allclose(prediction.bins["all"]["pull"], ((n - mu) / np.sqrt(mu)).ravel(), rtol=1e-12)
    total = n.sum(axis=1), mu.sum(axis=1)
    assert_allclose(prediction.fields["pull"], (total[0] - total[1]) / np.sqrt(total[1]), rtol=1e-12)
    assert_allclose(prediction.fields["ln_ratio"], np.log(total[0] / total[1]), rtol=1e-10)


def test_bins_that_are_not_used_are_masked_and_left_out_of_sums():
    """A bin without a count has no pull, and its field's n and expected are sums over the others."""
    used = np.ones((24, 10), bool)
    used[0, 4:] = used[1] = False
    survey = invented.survey(used=used)
    group = survey.groups[0]
    prediction = predict_counts(invented.model(survey))
    bins, fields = prediction.bins["all"], prediction.fields
    assert bins["n"].mask[:20].tolist() == [False] * 4 + [True] * 16
    assert bins["pull"].mask[4]
    assert fields["n"][0] == group.counts[0, :4].sum()
    assert_allclose(fields["expected"][0], bins["expected"][:4].sum(), rtol=1e-12)
    assert fields["n"].mask[1]
    assert_allclose(fields["expected_all"][1], bins["expected"][10:20].sum(), rtol=1e-12)
    assert "field 01" not in prediction.worst_fields(24)["field"]


def test_without_counts_everything_is_expected_and_nothing_compared():
    """A survey that is still to be observed gets expectations, no pulls, and empty lists of the worst."""
    prediction = predict_counts(invented.model(invented.survey(counts=None)))
    assert np.all(prediction.bins["all"]["expected"] > 0)
    assert prediction.bins["all"]["n"].mask.all()
    assert len(prediction.worst_fields()) == len(prediction.worst_bins()) == 0


def test_the_field_that_was_spoiled_comes_first(model):
    """One field in 24 got a quarter more stars than the model: it leads the fields and owns the worst bins."""
    prediction = predict_counts(model)
    assert prediction.worst_fields(3)["field"][0] == "field 08"
    assert set(prediction.worst_bins(5)["field"]) == {"field 08"}
    assert list(prediction.worst_bins(5)["tail"]) == sorted(prediction.worst_bins(5)["tail"])


@pytest.mark.parametrize(("n", "mean"), [(0, 0.5), (3, 3.0), (9, 3.0), (140, 100.0)])
def test_poisson_tails_count_half_of_the_count_itself(n, mean):
    """Two-sided mid-p from the probabilities themselves, summed one by one; 1e-9 is the sums' rounding."""
    p = np.exp(-mean) * np.cumprod(np.concatenate([[1.0], mean / np.arange(1, 400)]))
    lower, upper = p[:n].sum() + p[n] / 2, p[n + 1 :].sum() + p[n] / 2
    assert_allclose(tail_probability(n, mean, mean), min(1.0, 2 * min(lower, upper)), rtol=1e-9)


def test_a_wider_prediction_has_the_tails_of_gamma_mixed_poisson_counts():
    """Counts with a gamma-distributed expectation, simulated; 0.004 is four standard errors of 200 000 draws."""
    rng = np.random.default_rng(0)
    mean, variance, n = 40.0, 40.0 + 60.0, 58
    shape = mean**2 / 60.0
    drawn = rng.poisson(rng.gamma(shape, mean / shape, 200_000))
    simulated = 2 * (np.mean(drawn > n) + 0.5 * np.mean(drawn == n))
    assert_allclose(tail_probability(n, mean, variance), simulated, atol=0.004)


def test_where_no_star_is_expected_only_none_is_probable():
    """Expectation zero: no star is certain, one star impossible."""
    assert tail_probability([0, 1], [0.0, 0.0], [0.0, 0.0]).tolist() == [1.0, 0.0]


def test_drawn_counts_have_poisson_variance_plus_the_squared_floor():
    """Var = mu + (floor mu)^2, here 300 and 300 + 900, within 5 %: more than four standard errors of 20 000 draws."""
    expected = np.full((20_000, 1, 2), 300.0)
    for floor, variance in ((0.0, 300.0), (0.1, 300.0 + 900.0)):
        drawn = draw_counts(expected, np.full(20_000, floor), ["a"], seed=1)
        assert_allclose(drawn.mean(axis=0), 300.0, rtol=0.005)
        assert_allclose(drawn.var(axis=0), variance, rtol=0.05)


def test_a_field_more_changes_no_other_fields_draws():
    """Noise starts from the field's name: the same draws whatever else is in the survey."""
    expected = np.full((5, 3, 4), 20.0)
    floor = np.full(5, 0.1)
    three = draw_counts(expected, floor, ["a", "b", "c"], seed=2)
    one = draw_counts(expected[:, :1], floor, ["c"], seed=2)
    assert np.array_equal(three[:, 2], one[:, 0])
    assert not np.array_equal(three[:, 0], three[:, 1])


def test_posterior_quantiles_are_those_of_the_draws(from_posterior, model):
    """Of one field and bin, computed again from the parameters; predicted counts are wider than expected ones."""
    posterior, part = invented.posterior(), model.groups[0]
    chosen = np.unique(np.linspace(0, 399, 200).astype(int))
    thin, halo = (posterior.draws(name)[chosen] for name in invented.TRUTH)
    by_hand = thin * part.disc[2, 5] + halo * part.halo[2, 5] + 1.0
    row = from_posterior.bins["all"][25]
    for percent in (2.5, 16, 50, 84, 97.5):
        assert_allclose(row[f"expected_{percent:g}"], np.percentile(by_hand, percent), rtol=1e-12)
    assert_allclose(row["expected"], by_hand.mean(), rtol=1e-12)
    assert row["predicted_97.5"] - row["predicted_2.5"] > row["expected_97.5"] - row["expected_2.5"]


def test_large_groups_are_predicted_from_fewer_draws(model, monkeypatch):
    """Of 240 bins 24 000 numbers hold 100 draws, and the table says so; never fewer than fifty."""
    for most, number in ((24_000, 100), (1000, 50)):
        monkeypatch.setattr(counts, "MOST_NUMBERS", most)
        prediction = predict_counts(model, posterior=invented.posterior())
        assert len(prediction.groups["all"].draws) == number
        assert prediction.bins["all"].meta["draws"] == number


def test_variance_of_a_field_total_adds_shared_errors_before_squaring(from_posterior):
    """The draws move all bins of a field together; floor and Poisson noise are each bin's own."""
    group = from_posterior.groups["all"]
    floor = invented.posterior().floor("all")[np.unique(np.linspace(0, 399, 200).astype(int))]
    own = group.draws.mean(axis=0) + (floor[:, None, None] ** 2 * group.draws**2).mean(axis=0)
    variance = own.sum(axis=1) + group.draws.sum(axis=2).var(axis=0)
    assert_allclose(from_posterior.fields["sd"], np.sqrt(variance), rtol=1e-10)
    assert_allclose(from_posterior.bins["all"]["sd"], np.sqrt(own + group.draws.var(axis=0)).ravel(), rtol=1e-10)


def test_parts_of_a_posterior_sum_to_its_mean(from_posterior, model):
    """Components follow the mean, extra rows stay what they are; 3 % / sqrt(25) of sampling error in the shares."""
    group = from_posterior.groups["all"]
    assert_allclose(sum(group.parts.values()), group.draws.mean(axis=0), rtol=1e-12)
    assert np.all(group.parts["galaxies"] == 1.0)
    assert_allclose(group.parts["thin disc"], model.groups[0].disc, rtol=0.02)


def test_fitted_curves_enter_the_prediction(model):
    """A curve of height ln 2 on the disc's luminosity function doubles its stars; 1 % for the shares' few draws."""
    flat, doubled = (
        predict_counts(model, posterior=invented.posterior(curve=height), draws=50) for height in (0.0, np.log(2))
    )
    ratio = {name: doubled.groups["all"].parts[name] / flat.groups["all"].parts[name] for name in ("thin disc", "halo")}
    assert_allclose(ratio["thin disc"], 2.0, rtol=0.01)
    assert_allclose(ratio["halo"], 1.0, rtol=0.01)
    gain = doubled.groups["all"].draws - flat.groups["all"].draws
    assert_allclose(gain.mean(axis=0), model.groups[0].disc, rtol=0.02)


@pytest.fixture(scope="module")
def in_colour():
    """Counts in magnitude and colour, and the model they were drawn from."""
    survey = invented.survey(number=6, edges_colour_mag=invented.EDGES_COLOUR_MAG)
    return survey, invented.model(survey)


def test_rows_in_colour_are_flat_bins_with_their_limits(in_colour):
    """Magnitude before colour: row (field 2, magnitude 7, colour 3) is that of the arrays; the ends are open."""
    survey, model = in_colour
    table, n = predict_counts(model).bins["all"], survey.groups[0].counts.reshape(6, 10, 10)
    row = table[2 * 100 + 7 * 10 + 3]
    assert table.colnames[:6] == ["field", "m_lo", "m_hi", "c_lo", "c_hi", "n"]
    limits = [row[name].to_value("mag") for name in ("m_lo", "m_hi", "c_lo", "c_hi")]
    assert_allclose(limits, [17.0, 18.0, 0.8, 1.1], rtol=1e-12)
    assert row["n"] == n[2, 7, 3]
    assert table["c_lo"][0].value == -np.inf
    assert table["c_hi"][9].value == np.inf
    assert table.meta["colour"] == ["BP", "RP"]


def test_fields_in_colour_are_summed_over_all_bins(in_colour):
    """A field's total knows nothing of colours; only rounding is allowed."""
    survey, model = in_colour
    fields = predict_counts(model).fields
    assert fields["n"].tolist() == survey.groups[0].counts.sum(axis=1).tolist()
    assert_allclose(fields["expected"], model.groups[0].expected(invented.TRUTH).sum(axis=1), rtol=1e-12)


def test_worst_bins_name_their_colour(in_colour, model, survey):
    """Groups with and without colour share one list: limits of the one, an empty name of the other."""
    coloured_survey, coloured = in_colour
    part = replace(coloured.groups[0], group=replace(coloured_survey.groups[0], name="coloured"))
    both = SimpleNamespace(
        survey=replace(survey, groups=(*survey.groups, part.group)),
        galaxy=model.galaxy,
        prepared=lambda: iter((*model.groups, part)),
    )
    worst = predict_counts(both).worst_bins(400)
    named = np.asarray(worst["colour"]) == "BP-RP"
    assert named.tolist() == [name == "coloured" for name in worst["group"]]
    assert 0 < named.sum() < 400
    assert np.isnan(worst["c_lo"][~named].value).all()
    assert not np.isnan(worst["c_hi"][named].value).any()
    assert "colour" not in predict_counts(model).worst_bins(3).colnames


def test_classes_split_the_components(model):
    """Nine dwarfs to one red giant, as the fake says, at given values and over draws; classes sum to the components."""
    for prediction in (
        predict_counts(model, classes=True),
        predict_counts(model, posterior=invented.posterior(), draws=50, classes=True),
    ):
        table = prediction.bins["all"]
        for component in ("thin disc", "halo"):
            assert_allclose(table[f"{component} dwarf"], 0.9 * table[component], rtol=1e-10)
            assert_allclose(table[f"{component} red giant"], 0.1 * table[component], rtol=1e-10)
        assert [name for name in table.colnames if name.startswith("galaxies")] == ["galaxies"]
    assert "halo dwarf" not in predict_counts(model).bins["all"].colnames


def test_stars_outside_verified_ranges_are_a_caution_from_one_per_cent_on(survey):
    """0.9 % is passed over, 3.2 % is said with its group, and an unknown share is no caution."""
    for outside, said in ((None, 0), (0.009, 0), (0.032, 1)):
        cautions = predict_counts(invented.model(survey, outside)).cautions()
        assert len(cautions) == said
    assert "group all: 3.2 % of the expected stars" in cautions[0]


def test_a_dense_field_does_not_hide_the_others(survey):
    """A third of one field's stars is said with its name, however little it is of the group's."""
    names = survey.groups[0].fields.name
    shares = np.where(np.arange(names.size) == 3, 0.33, 0.0)
    (caution,) = predict_counts(invented.model(survey, shares)).cautions()
    assert f"most in field {names[3]}, 33 %" in caution


def _emptied(survey, keep):
    """The caution of a prediction without the stars and galaxies of the bins where ``keep`` (m, c) is zero."""
    group = survey.groups[0]
    keep = np.broadcast_to(keep, (group.edges_mag.size - 1, group.n_bin // (group.edges_mag.size - 1)))
    return caution_of_empty_bins(group, 100.0 * np.tile(keep.ravel(), (group.fields.name.size, 1)))


def test_bins_without_any_expected_star_are_a_caution(in_colour, survey):
    """Magnitude rows and colour columns that hold less than 1e-6 in all fields are named, neighbours as one."""
    coloured, _ = in_colour
    keep = np.ones(10)
    keep[[0, 4, 5, 9]] = 0.0
    said = _emptied(coloured, keep)
    assert "no star is expected at BP-RP all bluer to 0.2, BP-RP 1.1 to 1.7, BP-RP 2.6 to all redder in any" in said
    assert "group all: no star is expected at G 13 to 14 in any" in _emptied(survey, (np.arange(10) != 3)[:, None])
    # A row of a hundred thousandth part and a single bin are no matter for a caution.
    for share in (1e-3, 1e-5):
        assert _emptied(survey, np.where(np.arange(10) == 3, share, 1.0)[:, None]) == ""
    one_bin = np.ones((10, 10))
    one_bin[3, 4] = 0.0
    assert _emptied(coloured, one_bin) == ""


def test_a_group_without_stars_is_a_caution(model, in_colour):
    """What is printed as expected 0.0 is said in words; the whole sky of the fake has no such caution."""
    coloured, _ = in_colour
    for stars in (0.0, 1e-9):
        assert "group all: no star is expected in any of its bins and fields" in _emptied(coloured, stars)
    assert predict_counts(model).cautions() == []


def test_predictions_pass_the_caution_on(in_colour):
    """A caution about empty bins is among those that the screen and the page show."""
    survey, model = in_colour
    empty = replace(predict_counts(model).groups["all"], expected=np.zeros((6, 100)))
    assert len(as_prediction(survey, {"all": empty}, "values").cautions()) == 1


def test_predicted_intervals_cover_counts_drawn_from_the_model():
    """Counts drawn from one of the draws fall into their 95 % interval in 95 % of 480 bins; 4 sigma is 4 %."""
    survey = invented.survey(number=48, counts=None)
    model = invented.model(survey)
    prediction = predict_counts(model, posterior=invented.posterior(floor=0.05, seed=5), draws=400)
    truth = model.groups[0].expected(invented.TRUTH)
    rng = np.random.default_rng(9)
    n = rng.poisson(truth * rng.gamma(400.0, 1 / 400.0, truth.shape)).ravel()
    table = prediction.bins["all"]
    inside = (n >= table["predicted_2.5"]) & (n <= table["predicted_97.5"])
    assert abs(inside.mean() - 0.95) < 0.04


def test_draws_that_failed_their_checks_are_not_called_a_posterior(model):
    """The source of the numbers says what they rest on."""
    failed = predict_counts(model, posterior=invented.posterior(certified=False), draws=10)
    assert failed.source == "uncertified draws"
    assert predict_counts(model).source == "values"


def test_pulls_of_a_true_model_are_standard_normal():
    """240 bins of the right model: mean 0 and sd 1 within four standard errors, and tails uniform (KS p > 0.001)."""
    truth = invented.model(invented.survey()).groups[0].expected(invented.TRUTH)
    survey = invented.survey(counts=np.random.default_rng(4).poisson(truth))
    table = predict_counts(invented.model(survey)).bins["all"]
    assert abs(table["pull"].mean()) < 4 / np.sqrt(240)
    assert abs(table["pull"].std() - 1) < 4 / np.sqrt(480)
    assert stats.kstest(np.asarray(table["tail"]), "uniform").pvalue > 0.001
