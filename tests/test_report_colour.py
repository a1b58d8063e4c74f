"""Figures in magnitude and colour: no star lost, open bins shown, cells equal to the counts behind them."""

from dataclasses import replace

import invented_prediction as invented
import numpy as np
import pytest
from matplotlib.text import Text
from numpy.testing import assert_allclose
from parsed_page import Page

from starcount.predict import predict_counts
from starcount.report import FIGURES, PageContent, draw_figure, write_page
from starcount.report import page as page_module
from starcount.report.bands import add_up, colour_bands, latitude_bands
from starcount.report.colours import drawn_edges, magnitude_slices


def coloured_content(**more):
    survey = invented.survey(edges_colour_mag=invented.EDGES_COLOUR_MAG, **more)
    return PageContent("In colour", predict_counts(invented.model(survey)), {})


def test_sums_over_colour_are_the_counts_by_magnitude():
    """Bands added up over colours: counts, expectations and parts of each magnitude; areas stay the fields'."""
    group = coloured_content().prediction.groups["all"]
    bands = latitude_bands(group).values()
    for name in ("n", "expected"):
        by_magnitude = getattr(group, name).reshape(24, 10, 10).sum(axis=(0, 2))
        assert_allclose(sum(getattr(band, name) for band in bands), by_magnitude, rtol=1e-12)
    assert_allclose(sum(band.parts["halo"] for band in bands), group.parts["halo"].reshape(24, 10, 10).sum(axis=(0, 2)))
    assert_allclose(sum(band.area_deg2 for band in bands), group.group.fields.area_deg2.sum(), rtol=1e-12)


def test_stars_per_area_add_up_over_colours_used_in_different_fields():
    """Two equal fields, one of which misses half the colours: the sum per square degree is that of a full field.

    The fake halo is the same in all fields, so its density summed over colours must not depend on which are used.
    """
    used = np.ones((2, 100), bool)
    used[1].reshape(10, 10)[:, :5] = False
    fields = np.ones(2, bool)
    whole, parted = (
        add_up(replace(group, parts={}, expected=group.parts["halo"]), fields, "")
        for group in (coloured_content(number=2, used=u).prediction.groups["all"] for u in (None, used))
    )
    assert_allclose(parted.expected / parted.per_deg2_mag, whole.expected / whole.per_deg2_mag, rtol=1e-12)
    assert np.all(parted.expected < whole.expected)


def test_colour_bands_and_slices_lose_no_star():
    """Cells of the wide bands, and the slices of magnitude the colours are shown in, sum to all counts."""
    group = coloured_content().prediction.groups["all"]
    bands = colour_bands(group)
    total = group.n.sum(axis=0).reshape(10, 10)
    assert sum(band.n for band in bands).tolist() == total.tolist()
    slices = magnitude_slices(10)
    assert slices == [(0, 3), (3, 6), (6, 8), (8, 10)]
    in_slices = sum(band.rows(*part).summed(-2).n for band in bands for part in slices)
    assert in_slices.tolist() == total.sum(axis=0).tolist()
    assert magnitude_slices(2) == [(0, 1), (1, 2)]


@pytest.mark.parametrize(
    ("edges", "drawn"),
    [
        ([0.0, 0.5, 1.5], [0.0, 0.5, 1.5]),
        ([-np.inf, 0.0, 0.5, 1.5, np.inf], [-0.5, 0.0, 0.5, 1.5, 2.5]),
        ([-np.inf, 0.8, np.inf], [0.3, 0.8, 1.3]),
        ([-np.inf, 0.8, 1.0], [0.6, 0.8, 1.0]),
    ],
)
def test_open_bins_are_drawn_as_wide_as_their_neighbours(edges, drawn):
    """Finite edges stay; an open bin gets its neighbour's width, half a magnitude where it has none."""
    assert_allclose(drawn_edges(np.array(edges)), drawn, rtol=1e-12)


def test_diagrams_hold_the_stars_per_area_of_their_cells():
    """Cells of the three panels, read back from the figure: shares of the densest, ln of the ratio in rich ones."""
    content = coloured_content()
    figure = draw_figure("colour-magnitude", content, "all")
    band = colour_bands(content.prediction.groups["all"])[0]
    shown = [axes.collections[-1].get_array().reshape(10, 10) for axes in figure.axes[:3]]
    cells = band.area_deg2 * np.diff(band.edges_mag)[:, None] * np.diff(drawn_edges(band.edges_colour_mag))
    for found, stars in zip(shown, (band.n, band.expected), strict=False):
        assert_allclose(np.ma.filled(found, 0.0), stars / cells / (band.expected / cells).max(), rtol=1e-12)
    rich = (band.n >= 25) & (band.expected >= 25)
    assert_allclose(shown[2][rich], np.log(band.n[rich] / band.expected[rich]), rtol=1e-9)
    poor = np.maximum(band.n, band.expected) < 25
    assert poor.any()
    assert np.ma.getmaskarray(shown[2])[poor].all()


def test_open_bins_are_marked_in_every_panel():
    """An arrow out of the figure at each open end of the diagrams and of the distributions."""
    content = coloured_content()
    for name, panels in (("colour-magnitude", 12), ("colours", 16)):
        figure = draw_figure(name, content, "all")
        for axes in figure.axes[:panels]:
            assert {"<", ">"} <= {line.get_marker() for line in axes.get_lines()}


def test_a_page_in_colour_names_bands_bins_and_cautions(tmp_path, monkeypatch):
    """Both bands with their systems, open bins in words, colours of the worst bins, and what is extrapolated."""
    monkeypatch.setattr(page_module, "FIGURES", {"colours": FIGURES["colours"]})
    survey = invented.survey(number=6, edges_colour_mag=invented.EDGES_COLOUR_MAG)
    prediction = predict_counts(invented.model(survey, outside=0.2))
    text = write_page(tmp_path, PageContent("In colour", prediction, {})).read_text(encoding="utf-8")
    page = Page(text)
    assert "BP − RP" in text
    assert "open bins hold all bluer ones and all redder ones" in text
    assert "group all: 20 % of the expected stars" in text
    assert page.tables["Bins that fit worst"][0][4:7] == ["colour", "c lo [mag]", "c hi [mag]"]
    assert (tmp_path / "figures" / "colours.pdf").is_file()


def test_before_observing_colours_are_drawn_without_counts():
    """Only expectations: one panel a band, no ratio; all colours in one bin are no diagram."""
    content = coloured_content(number=6, counts=None)
    figure = draw_figure("colour-magnitude", content, "all")
    assert "counted" not in " ".join(label.get_text() for label in figure.findobj(Text))
    draw_figure("colours", content, "all")
    alone = invented.survey(number=2, edges_colour_mag=[-np.inf, np.inf])
    assert PageContent("t", predict_counts(invented.model(alone)), {}).coloured_groups == ()
