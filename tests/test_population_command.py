"""``starcount population``: what it prints and writes, and that its table is itself a population."""

import json

import numpy as np
import pytest
import skies
from astropy.table import QTable
from numpy.testing import assert_allclose
from own_files import ISOCHRONES, isochrone_rows, write_own

from starcount import stars, steps
from starcount.cli import main
from starcount.errors import InputError
from starcount.forward import ForwardModel, layer_functions
from starcount.galaxy import read_galaxy
from starcount.report.population import PopulationTable, population_figure


@pytest.fixture(autouse=True)
def working_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def undrawn(monkeypatch):
    """Leave out the figure, which takes most of the time, where only numbers are looked at."""
    monkeypatch.setattr("starcount.report.style.save_figure", lambda *given: None)


def density_pc3(run, name):
    return next(row["stars"] for row in run.record["result"]["classes"] if row["class"] == name)


def test_census_is_what_the_thin_disc_holds_at_the_sun(undrawn):
    """The sum over classes is the component's density in the window times its function, read from its own tables."""
    run = steps.population("census", band="V")
    galaxy = read_galaxy("default")
    thin = [component.population == "census" for component, _ in galaxy.layers]
    amplitude = galaxy.amplitudes(galaxy.values)["thin"]
    total = amplitude * layer_functions(galaxy, "V")[thin].sum()
    assert_allclose(sum(row["stars"] for row in run.record["result"]["classes"]), total, rtol=1e-9)
    written = QTable.read(run.folder / "function.ecsv")
    window = (written["M_lo"].value > 4.49) & (written["M_hi"].value < 8.51)
    in_window = (written["all"] * (written["M_hi"] - written["M_lo"]))[window].sum().to_value("pc-3")
    assert_allclose(in_window, amplitude, rtol=1e-9)


def test_local_densities_by_class_agree_with_counts_within_25_pc(undrawn):
    """Golovin et al. 2023 (25 pc) count 4946 main-sequence stars, 20 red giants and 264 white dwarfs, one by one:
    0.0756, 3.1e-4 and 4.0e-3 pc^-3. Ours are systems (0.8 to 0.9 of dwarfs), less thick disc and halo (11 %)."""
    run = steps.population("census")
    assert 0.65 < density_pc3(run, "dwarf") / 0.0756 < 0.87
    giants = density_pc3(run, "red giant") + density_pc3(run, "clump")
    assert_allclose(giants, 3.1e-4, rtol=0.22)  # the Poisson error of 20 stars
    assert_allclose(density_pc3(run, "white dwarf"), 4.0e-3, rtol=0.2)  # that of the 20 within 10 pc


@pytest.mark.parametrize(("name", "band"), [("thick disc", "G"), ("halo", "SDSS r"), ("bulge", "Ks")])
def test_the_table_it_writes_is_a_population_that_gives_the_same_counts(name, band, undrawn):
    """Read as a user's own colour table, every bin of magnitude and colour holds what the population put there."""
    run = steps.population(name, band=band)
    colour = tuple(run.record["result"]["colour"])
    own = run.folder / "colour-magnitude.toml"
    reference = stars.BANDS[band].reference

    def counted(population):
        lf, locus = stars.population(population, reference), stars.locus(population, reference)
        table = stars.spread(locus, lf[None], band, colour, np.array([5800.0]))[0, 0]
        return table.reshape(300, 2, 170).sum(axis=1)  # bins of 0.1 x 0.05 mag

    assert_allclose(counted(own), counted(name), rtol=1e-9, atol=1e-12 * counted(name).sum())


def test_a_field_holds_the_same_stars_through_a_table_of_ones_own(undrawn):
    """A halo in a Galaxy, and its colour-magnitude table in its place: the same counts in G and BP - RP without dust,
    to 0.2 % in all and to 1 % in every bin with more than 1 % of the stars (the table has bins of 0.1 x 0.05 mag)."""
    own = steps.population("halo").folder / "colour-magnitude.toml"
    fields = skies.circles(30.0, 60.0, A_V_mag=[0.0])
    colours = np.array([-np.inf, 0.4, 0.8, 1.2, np.inf])
    survey = skies.survey(fields, np.arange(14.0, 19.1), "G", colour=("BP", "RP"), edges_colour_mag=colours)

    def counts(population):
        galaxy = skies.galaxy("uniform", [], value=1e-5, population=population)
        (group,) = ForwardModel(survey, galaxy).groups
        return group.expected(galaxy.values)[0]

    theirs, ours = counts(str(own)), counts("halo")
    assert_allclose(theirs.sum(), ours.sum(), rtol=2e-3)
    held = ours > 0.01 * ours.sum()
    assert held.sum() > 4
    assert_allclose(theirs[held], ours[held], rtol=0.01)


def test_functions_of_a_population_integrate_to_its_classes(undrawn):
    """The function per magnitude, times the width of its cells, is the number of each class."""
    run = steps.population("halo")
    written = QTable.read(run.folder / "function.ecsv")
    width = (written["M_hi"] - written["M_lo"]).value
    for row in run.record["result"]["classes"]:
        assert_allclose(written[row["class"]].value @ width, row["stars"], rtol=1e-9)
    assert_allclose(sum(row["share"] for row in run.record["result"]["classes"]), 1.0, rtol=1e-12)


def test_it_says_where_the_numbers_come_from_and_how_far_they_reach(capsys, undrawn):
    """Classes, sources, shares outside, and the Galaxy's own density of this population are printed; JSON has them."""
    assert main(["population", "halo", "--band", "SDSS r"]) == 0
    printed = capsys.readouterr().out
    assert printed.startswith("halo in SDSS r, colour SDSS g - SDSS r; stars per mag and system with 4.5 < M_V < 8.5")
    for words in ("horizontal branch", "Galaxy default: component halo has", "outside their verified range: SDSS r "):
        assert words in printed
    assert "SDSS r: Fukugita et al. 1996, AJ 111, 1748, AB magnitudes" in printed
    assert main(["population", "halo", "--band", "SDSS r", "--json"]) == 0
    record = json.loads(capsys.readouterr().out)
    assert record["options"]["band"] == "SDSS r"
    assert set(record["result"]["outside"]) == {"SDSS r", "SDSS g"}


def test_it_writes_its_files_and_replaces_only_its_own(working_folder):
    """Tables, settings and figure lie in outputs/; a folder given by --out must be new."""
    run = steps.population("halo")
    assert {path.name for path in run.folder.iterdir()} == {
        *(f"{table}.{ending}" for table in ("function", "colour-magnitude") for ending in ("ecsv", "csv")),
        *("colour-magnitude.toml", "population.pdf", "population.png", "run.json"),
    }
    assert run.folder.as_posix() == "outputs/population-halo"
    (working_folder / "mine").mkdir()
    with pytest.raises(InputError, match="mine: exists already"):
        steps.population("halo", out="mine")


def test_a_population_of_ones_own_is_shown_with_its_own_sources(working_folder, undrawn):
    """The file and its table are inputs with their digests; bands it lacks make no colour by default."""
    table = isochrone_rows()
    table.remove_columns(["BP"])
    path = write_own(working_folder, {**ISOCHRONES, "sources": ["invented for a test"]}, table)
    run = steps.population(path)
    result = run.record["result"]
    assert result["sources"][0] == "invented for a test"
    assert result["colour"] is None
    assert result["no_colour"] == "BP - RP is not known for all its stars; choose another colour"
    assert {item["path"].split("/")[-1] for item in run.record["provenance"]["inputs"]} == {"own.toml", "own.ecsv"}
    assert steps.population(path, colour=("V", "RP")).record["result"]["colour"] == ["V", "RP"]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["young disc"], "no population called 'young disc'; known: "),
        (["RR Lyrae"], "RR Lyrae: not in these populations; "),
        (["none.toml"], "none.toml: no such file; expected a population in TOML"),
        (["halo", "--band", "U"], "band 'U' is left out: "),
        (["halo", "--band", "g"], "no band called 'g'; known: "),
        (["halo", "--colour", "BP", "K"], "no band called 'K'; known: "),
        (["census", "--galaxy", "mine.toml"], "mine.toml: no such file; expected a Galaxy in TOML"),
    ],
)
def test_what_cannot_be_shown_is_one_line(capsys, arguments, message):
    """Unknown and absent populations, bands and Galaxies: status 2 and one line."""
    assert main(["population", *arguments]) == 2
    said = capsys.readouterr().err.splitlines()
    assert len(said) == 1
    assert message in said[0]


def test_the_diagram_shows_a_star_where_it_is():
    """One clump of stars at M = 0.5 and colour 1.2: the darkest cell of the figure, and the outline around it."""
    M_edges, C_edges = stars.M_EDGES_MAG, stars.C_EDGES_MAG
    cells = np.zeros((2, M_edges.size - 1, C_edges.size - 1))
    M, C = (M_edges[1:] + M_edges[:-1]) / 2, (C_edges[1:] + C_edges[:-1]) / 2
    cells[1] = np.exp(-0.5 * (((M[:, None] - 0.525) / 0.2) ** 2 + ((C - 1.225) / 0.1) ** 2))
    table = PopulationTable("invented", "G", ("BP", "RP"), "pc3", ("dwarf", "clump"), M_edges, C_edges, cells)
    left, right, *_ = population_figure(table).axes
    mesh = right.collections[0]
    corners = mesh.get_coordinates()
    row, column = np.unravel_index(mesh.get_array().argmax(), mesh.get_array().shape)
    assert_allclose(corners[row, column] + [0.025, 0.05], [1.225, 0.525], atol=0.051)
    outline = right.collections[-1].get_paths()[0].vertices
    assert_allclose(outline.mean(axis=0), [1.225, 0.525], atol=0.05)
    # 90 % of a Gaussian lie inside 2.146 of its widths.
    assert_allclose(np.ptp(outline, axis=0) / 2, [0.2146, 0.4292], rtol=0.06)
    assert right.get_ylim()[0] > right.get_ylim()[1]
    assert [text.get_text() for text in left.figure.legends[0].get_texts()] == ["all", "clump"]


def test_a_galaxy_without_the_census_is_refused(capsys, working_folder):
    """What the census holds at the Sun needs a component that it fills."""
    text = 'format = 1\nname = "bare"\nsun = {R0_kpc = 8.2, z0_kpc = {value = 0.02, error = 0.005}}\n[[component]]\n'
    text += 'name = "only"\nlaw = "uniform"\npopulation = "halo"\namplitude = "density"\n'
    text += "parameters = {density = {value = 1e-5, error = 1e-6}}\n"
    (working_folder / "bare.toml").write_text(text)
    assert main(["population", "census", "--galaxy", "bare.toml"]) == 2
    assert "Galaxy 'bare': no component has the population 'census'" in capsys.readouterr().err
