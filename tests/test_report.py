"""The page and its figures: the page's numbers are the tables', nothing from outside, hostile names harmless."""

import json
import re
from dataclasses import replace

import invented_prediction as invented
import numpy as np
import pytest
from astropy.table import QTable, Table
from matplotlib.colors import to_rgb
from matplotlib.text import Text
from numpy.testing import assert_allclose
from parsed_page import Page

from starcount.predict import predict_counts
from starcount.report import (
    FIGURES,
    PageContent,
    draw_figure,
    page_content,
    parameter_table,
    render,
    save_figure,
    write_page,
    write_tables,
)
from starcount.report.bands import add_up, latitude_bands
from starcount.report.page import cell, shown_table
from starcount.report.posteriors import main_parameters
from starcount.report.style import LINES, MARKS, new_figure

PROVENANCE = {"package": "starcount", "seed": 7, "inputs": [{"path": "a.ecsv", "sha256": "ab" * 32}]}
HOSTILE = ["<script>alert(1)</script>", "$x_{$ \\frac", '"><img src=x onerror=alert(2)>', "漢字 & Söhne", "{{ 7 * 7 }}"]
MINUS = str.maketrans("−", "-")


PLAIN_FIGURES = set(FIGURES) - {"colour-magnitude", "colours"}
"""What is drawn where no group has a colour."""


def fitted_content(certified=True):
    posterior = invented.posterior(certified=certified)
    prediction = predict_counts(invented.model(invented.survey()), posterior=posterior, draws=50)
    return page_content("A fit", prediction, PROVENANCE, posterior, truth=invented.TRUTH)


@pytest.fixture(scope="module")
def fitted():
    return fitted_content()


@pytest.fixture(scope="module")
def written(fitted, tmp_path_factory):
    folder = tmp_path_factory.mktemp("run")
    write_tables(fitted.prediction, folder, {"provenance": PROVENANCE})
    write_page(folder, fitted)
    return folder


@pytest.fixture(scope="module")
def page(written):
    return Page((written / "report.html").read_text(encoding="utf-8"))


def close(shown: str, exact: float) -> bool:
    """Whether a shown number is the exact one to the four figures that are shown."""
    return np.isclose(float(shown.translate(MINUS)), exact, rtol=5.1e-4)


def test_worst_fields_on_the_page_are_those_of_the_written_table(page, written):
    """Every number of the list is read back from fields.ecsv; four figures are shown."""
    table = QTable.read(written / "fields.ecsv")
    head, *rows = page.tables["Fields that fit worst"]
    assert len(rows) == 8
    for row in rows:
        shown = dict(zip(head, row, strict=True))
        exact = table[table["field"] == shown["field"]][0]
        assert int(shown["n"]) == exact["n"]
        assert close(shown["b [deg]"], exact["b"].value)
        assert all(
            close(shown[name.replace("_", " ")], exact[name]) for name in ("expected", "ln_ratio", "pull", "tail")
        )


def test_worst_bins_on_the_page_are_those_of_the_written_table(page, written):
    """Every number of the list is read back from predicted-all.csv."""
    table = Table.read(written / "predicted-all.csv")
    head, *rows = page.tables["Bins that fit worst"]
    for row in rows:
        shown = dict(zip(head, row, strict=True))
        same = (table["field"] == shown["field"]) & (table["m_lo_mag"] == float(shown["m lo [mag]"]))
        exact = table[same][0]
        assert int(shown["n"]) == exact["n"]
        assert all(close(shown[name], exact[name]) for name in ("expected", "pull", "tail"))


def test_parameters_on_the_page_are_those_of_the_written_table(page, written):
    """Medians, intervals, priors, truths and flags are read back from parameters.csv."""
    table = Table.read(written / "parameters.csv")
    head, *rows = page.tables["Parameters"]
    assert [row[0].removesuffix(" [pc-3]") for row in rows] == list(table["parameter"])
    for row, exact in zip(rows, table, strict=True):
        shown = dict(zip(head, row, strict=True))
        assert close(shown["median"], exact["median"])
        for name, low, high in (("68 %", "lower_68", "upper_68"), ("95 %", "lower_95", "upper_95")):
            ends = shown[name].split(" to ")
            assert close(ends[0], exact[low])
            assert close(ends[1], exact[high])
        assert (shown["note"] == "prior-dominated") == (exact["prior_dominated"] == "True")


def test_truth_against_recovery_is_that_of_the_written_table(page, written):
    """Where a truth is known it stands beside what was found; the floor's is not known here."""
    table = Table.read(written / "parameters.csv")
    rows = page.tables["Truth against recovery"][1:]
    assert len(rows) == 2
    for row, exact in zip(rows, table, strict=False):
        for shown, name in zip(row[1:], ("truth", "median", "sd", "off_by_sd"), strict=True):
            assert close(shown, exact[name])


def test_component_sums_are_those_of_the_written_table(page, written):
    """The stars expected of each component are the column sums of predicted-all.ecsv."""
    table = QTable.read(written / "predicted-all.ecsv")
    for group, component, expected, share in page.tables["Stars expected by component"][1:]:
        assert group == "all"
        assert close(expected, table[component].sum())
        assert close(share, 100 * table[component].sum() / table["expected"].sum())


def test_the_page_refers_to_nothing_outside(page):
    """No script, style sheet, frame or link; every picture is inline; the policy forbids the rest."""
    tags = {tag for tag, _ in page.tags}
    assert not tags & {"script", "link", "iframe", "object", "embed", "form", "a", "base"}
    policies = [attrs["content"] for tag, attrs in page.tags if attrs.get("http-equiv") == "Content-Security-Policy"]
    assert len(policies) == 1
    assert policies[0].startswith("default-src 'none'; img-src data:; style-src 'unsafe-inline'")
    pictures = [attrs for tag, attrs in page.tags if tag == "img"]
    assert all(attrs["src"].startswith("data:image/png;base64,") and attrs["alt"] for attrs in pictures)
    assert len(pictures) == len(PLAIN_FIGURES)


def test_every_figure_is_written_twice_with_its_provenance(written):
    """PDF with editable (type 42) letters, PNG with the record as JSON."""
    from PIL import Image

    for name in PLAIN_FIGURES:
        pdf = (written / "figures" / f"{name}.pdf").read_bytes()
        assert b"/FontFile2" in pdf
        assert b"/Type3" not in pdf
        assert b"sha256" in pdf
        with Image.open(written / "figures" / f"{name}.png") as picture:
            assert json.loads(picture.info["provenance"]) == PROVENANCE
            assert picture.info["dpi"] == pytest.approx((300, 300), abs=0.1)


def test_provenance_stands_at_the_end_and_in_the_tables(written):
    """What made the page, with the digests of its inputs, on the page and in the meta of every ECSV."""
    text = (written / "report.html").read_text(encoding="utf-8")
    assert text.index("ab" * 32) > text.index("<h2>Cautions</h2>")
    for name in ("fields", "predicted-all", "parameters", "derived", "components"):
        assert QTable.read(written / f"{name}.ecsv").meta["provenance"] == PROVENANCE


def test_what_was_counted_is_said(written):
    """Band, magnitude system, closed and open edges, area, stars, dust and completeness."""
    text = (written / "report.html").read_text(encoding="utf-8")
    stars = int(invented.survey().groups[0].counts.sum())
    for words in (
        "Gaia system, Vega magnitudes",
        "closed at the bright and open at the faint edge",
        f"{stars} in 240 bins",
        "24 with 96.0004 deg²",
        "every star counted",
        "10 of 1 mag from 10 to 20",
        "Invented data",
    ):
        assert words in text


def test_hostile_names_stay_text():
    """Field names, titles and groups from a user's file reach the page as text and the figures as letters."""
    survey = invented.survey(number=5, names=HOSTILE)
    prediction = predict_counts(invented.model(survey))
    content = PageContent("<script>alert(0)</script>", prediction, {"command": "<script>alert(3)</script>"})
    page = Page(render(content, [{"source": "data:", "alt": HOSTILE[2], "caption": HOSTILE[0], "width_percent": 70}]))
    assert {row[1] for row in page.tables["Fields that fit worst"][1:]} == set(HOSTILE)
    assert not [tag for tag, attrs in page.tags if tag == "script" or "onerror" in attrs]
    draw_figure("worst-fields", content, "all")


def test_a_figure_of_hostile_names_can_be_written(tmp_path):
    """Letters that the font lacks and unbalanced formulas neither stop a figure nor warn."""
    prediction = predict_counts(invented.model(invented.survey(number=3, names=HOSTILE[1:4])))
    figure = draw_figure("worst-fields", PageContent("t", prediction, {}), "all")
    assert all(path.stat().st_size > 1000 for path in save_figure(figure, tmp_path / "f", {}))


def test_a_failed_fit_is_never_called_a_posterior():
    """FAILED CHECKS on the page and on every figure of the fit; the word posterior nowhere."""
    content = fitted_content(certified=False)
    figures = [{"source": "", "alt": k.alt, "caption": k.caption, "width_percent": 70} for k in FIGURES.values()]
    text = render(content, figures)
    assert "FAILED CHECKS" in text
    assert "posterior" not in re.sub(r"<style>.*?</style>", "", text, flags=re.S).lower()
    for name in ("corner", "sky"):
        words = [label.get_text() for label in draw_figure(name, content, "all").findobj(Text)]
        assert any("FAILED CHECKS" in label for label in words)
        assert not any("posterior" in label.lower() for label in words)


def test_a_passed_fit_says_so_with_thresholds(page):
    """Each check with what was found and asked."""
    rows = page.tables["Checks of the fit"]
    assert ["largest r-hat", "1.004", "at most 1.01", "yes"] in rows
    assert ["smallest bulk ESS", "812", "at least 400", "yes"] in rows


def test_a_fit_without_a_verdict_is_refused(fitted):
    """Numbers of a fit are not shown without saying whether it passed."""
    with pytest.raises(ValueError, match="verdict"):
        PageContent("t", fitted.prediction, {}, parameters=fitted.parameters)


def test_a_prediction_alone_has_no_fit_on_its_page(tmp_path):
    """Without counts and fit: components and cautions, no parameters, no worst bins, one figure."""
    prediction = predict_counts(invented.model(invented.survey(number=4, counts=None, invented=False)))
    text = write_page(tmp_path, PageContent("Before observing", prediction, PROVENANCE)).read_text(encoding="utf-8")
    page = Page(text)
    assert set(page.tables) == {"Stars expected by component"}
    assert [tag for tag, _ in page.tags].count("img") == 1
    assert "Invented" not in text.replace("An invented sky", "").replace("<p>Invented:", "")


def test_parameter_table_by_hand(fitted):
    """Medians and intervals are numpy's percentiles; shrinkage compares central 68 % widths; the halo's is small."""
    table = parameter_table(fitted.parameters)
    thin = invented.posterior().draws("thin.amplitude")
    assert_allclose(list(table[0]["lower_95", "lower_68", "median", "upper_68", "upper_95"]),
                    np.percentile(thin, [2.5, 16, 50, 84, 97.5]), rtol=1e-12)  # fmt: skip
    width = np.diff(np.percentile(thin, [16, 84]))[0]
    assert table["shrinkage"][0] == pytest.approx(1 - width / 0.6)
    assert list(table["prior_dominated"]) == [False, True, False]
    assert table["off_by_sd"][0] == pytest.approx((np.median(thin) - 1) / thin.std())
    assert table["truth"].mask.tolist() == [False, False, True]


def test_main_parameters_are_those_the_counts_narrowed(fitted):
    """Of nine the disc's amplitude is kept first; the scatter of the counts comes last, narrow as it is."""
    many = (*fitted.parameters, *(replace(fitted.parameters[1], name=f"x{i}") for i in range(7)))
    names = [parameter.name for parameter in main_parameters(many)]
    assert len(names) == 8
    assert names[0] == "thin.amplitude"
    assert "floor.all" not in names


def test_latitude_bands_hold_each_field_once(fitted):
    """Summed over bands, counts, expectations and areas are those of all fields; so are north and south."""
    group = fitted.prediction.groups["all"]
    for sides in ((0,), (1, -1)):
        bands = [band for side in sides for band in latitude_bands(group, side).values()]
        assert sum(band.total.n for band in bands).tolist() == group.n.sum(axis=0).tolist()
        assert_allclose(sum(band.total.expected for band in bands), group.expected.sum(axis=0), rtol=1e-12)
        assert_allclose(sum(band.area_deg2 for band in bands), group.group.fields.area_deg2.sum(), rtol=1e-12)


def test_fields_added_up_share_their_models_error(fitted):
    """Variance of a sum of fields: own noise adds, the draws are summed first."""
    group = fitted.prediction.groups["all"]
    band = add_up(group, np.ones(24, bool), "all")
    by_hand = group.own_variance.sum(axis=0) + group.draws.sum(axis=1).var(axis=0)
    assert_allclose(band.total.variance, by_hand, rtol=1e-12)


def test_l_grows_to_the_left_and_colour_follows_the_sign(fitted):
    """On the sky map a field at l = 20 lies left of the centre, and the field that is too rich is red."""
    axes = draw_figure("sky", fitted, "all").axes[0]
    spoiled = next(c for c in axes.collections if c.get_paths() and "over 4" in str(c.get_label()))
    x, y = spoiled.get_offsets()[0]
    table = fitted.prediction.fields
    where = table[table["field"] == "field 08"][0]
    assert_allclose([-np.degrees(x), np.degrees(y)], [where["l"].value, where["b"].value], rtol=1e-6)
    red, _, blue, _ = spoiled.to_rgba(spoiled.get_array())[0]
    assert red > blue


def test_lines_and_marks_differ_in_shape_and_colour():
    """Readable without colour: no two components share dashes, no two classes a marker; colours are all apart."""
    for styles in (LINES, MARKS):
        assert len({str(shape) for _, shape in styles}) == len(styles)
        colours = np.array([to_rgb(colour) for colour, _ in styles])
        apart = np.linalg.norm(colours[:, None] - colours, axis=2) + 10 * np.eye(len(colours))
        assert apart.min() > 0.15


def test_the_same_figure_gives_the_same_bytes(tmp_path):
    """No time of writing is stored."""
    first, second = (save_figure(new_figure(1.0), tmp_path / name, PROVENANCE) for name in ("a", "b"))
    assert [path.read_bytes() for path in first] == [path.read_bytes() for path in second]
    assert b"CreationDate" not in first[0].read_bytes()


@pytest.mark.parametrize(
    ("value", "words"),
    [
        (1234567, "1234567"),
        (-0.00123456, "−0.001235"),
        (np.ma.masked, "–"),
        (True, "yes"),
        (np.float64(3), "3"),
        ("a", "a"),
        (np.nan, "–"),
        (-np.inf, "−∞"),
        (np.float64(np.inf), "∞"),
    ],
)
def test_cells(value, words):
    """Whole numbers in full, others with four figures, a dash for what is missing, the sign of what is infinite."""
    assert cell(value) == words


def test_units_stand_in_heads():
    """A column with a unit shows it; names lose their underscores."""
    prediction = predict_counts(invented.model(invented.survey(number=2)))
    assert shown_table(prediction.fields)["head"][2:5] == ["l [deg]", "b [deg]", "area [deg2]"]
