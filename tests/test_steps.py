"""The steps on small surveys: what they write, what they say, what they refuse."""

import json
from pathlib import Path

import numpy as np
import own_files
import pytest
from astropy.table import QTable

from starcount import steps
from starcount.cli import main, screen
from starcount.errors import InputError, UnknownName
from starcount.galaxy.read import PUBLISHED
from starcount.report import page
from starcount.survey import Survey, circle_fields, make_group, read_survey, write_survey

DEMO = Path(__file__).parents[1] / "fields" / "demo"


@pytest.fixture(autouse=True)
def in_empty_folder(tmp_path, monkeypatch):
    """An empty folder, and one figure a page: drawing all of them takes seconds, and other tests look at them."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(page, "FIGURES", {"sky": page.FIGURES["sky"]})


def test_check_says_what_a_survey_holds():
    """Groups, fields, area and stars, as numbers."""
    record = steps.check(DEMO)
    survey = read_survey(DEMO)
    assert [group["stars"] for group in record["groups"]] == [int(group.counts.sum()) for group in survey.groups]
    assert [group["fields"] for group in record["groups"]] == [18, 6]


@pytest.fixture
def coloured():
    """A survey of two fields in magnitude and colour, with counts of one star a bin; invented."""
    fields = circle_fields(["low", "high"], [10.0, 200.0], [20.0, 70.0], [0.5, 0.5])
    bins = {"colour": ("BP", "RP"), "edges_colour_mag": [-np.inf, 1.0, np.inf]}
    group = make_group("one", "G", [12.0, 14.0, 16.0], fields, np.ones((2, 4), np.int64), **bins)
    write_survey(Survey("Coloured", "Invented", True, (group,)), Path("coloured"))
    return Path("coloured")


def test_check_says_which_colour(coloured, capsys):
    """Bands, number and limits of the colour bins, in lines and as JSON, where an open end is null."""
    assert main(["check", str(coloured)]) == 0
    assert "BP-RP, 2 from all bluer to all redder" in capsys.readouterr().out
    colour = {"bands": ["BP", "RP"], "bins": 2, "c_lo_mag": None, "c_hi_mag": None}
    assert steps.check(coloured)["groups"][0]["colour"] == colour
    assert steps.check(DEMO)["groups"][0]["colour"] is None


def test_predict_in_colour_by_class(coloured, capsys):
    """A column for every class with stars, which sum to the components but for rounding; the screen names colours."""
    assert main(["predict", str(coloured), "--classes", "--run", "split", "--json"]) == 0
    result = json.loads(capsys.readouterr().out)["result"]
    table = QTable.read(Path("outputs", "split", "predicted-one.ecsv"))
    halo = [name for name in table.colnames if name.startswith("halo ")]
    assert {"halo dwarf", "halo red giant"} <= set(halo)
    np.testing.assert_allclose(sum(table[name] for name in halo), table["halo"], rtol=1e-9)
    by_class = result["groups"]["one"]["classes"]["halo"]
    np.testing.assert_allclose(by_class["red giant"], table["halo red giant"].sum(), rtol=1e-12)
    assert {row["colour"] for row in result["worst_bins"]} == {"BP-RP"}
    assert all(row["c_lo"] is None or row["c_hi"] is None for row in result["worst_bins"])
    lines = screen.run_lines(json.loads(Path("outputs", "split", "run.json").read_text()))
    assert any(line.startswith("expected of one") and "red giant" in line for line in lines)
    assert any("BP-RP to 1" in line or "BP-RP from 1" in line for line in lines)


def test_cautions_stand_on_the_screen():
    """A caution of the prediction is a line of its own."""
    group = {"expected": 1.0, "counted": None, "expected_of_counted": None, "classes": {}}
    result = {"groups": {"one": group}, "worst_bins": [], "cautions": ["group one: 3 % of the stars"]}
    lines = screen.run_lines({"result": result, "folder": "outputs/one", "run": "one"})
    assert "caution: group one: 3 % of the stars" in lines


def test_predict_writes_tables_that_equal_the_arrays():
    """The numbers of the table on disk are those returned, with the provenance beside them."""
    done = steps.predict(DEMO, run="one")
    table = QTable.read(done.folder / "predicted-wide.ecsv")
    np.testing.assert_array_equal(table["expected"], done.prediction.groups["wide"].expected.ravel())
    assert table.meta["run"] == "one"
    assert {Path(entry["path"]).name for entry in table.meta["provenance"]["inputs"]} >= {"survey.toml", "truth.toml"}


def test_a_run_holds_all_that_its_page_needs(tmp_path):
    """The page of a run is drawn from the run's folder: the survey may be gone by then."""
    copy = tmp_path / "mine"
    copy.mkdir()
    for path in DEMO.iterdir():
        (copy / path.name).write_bytes(path.read_bytes())
    done = steps.predict(copy)
    for path in copy.iterdir():
        path.unlink()
    again = steps.report(done.folder.name)
    assert Path(again.record["page"]).is_file()
    np.testing.assert_array_equal(again.prediction.groups["wide"].expected, done.prediction.groups["wide"].expected)


@pytest.fixture
def own_galaxy():
    """A Galaxy whose halo and thick disc are of invented populations, one with its table in another folder."""
    home = Path("mine")
    (home / "tables").mkdir(parents=True)
    settings = own_files.FUNCTION
    made = own_files.write_own(home / "tables", settings, own_files.function_rows(), ending=".fits")
    made.rename(home / "old.toml")
    (home / "old.toml").write_text((home / "old.toml").read_text().replace('"own.fits"', '"tables/own.fits"'))
    own_files.function_rows().write(home / "thick.ecsv", format="ascii.ecsv")
    text = (PUBLISHED / "default.toml").read_text().replace('population = "halo"', 'population = "old.toml"')
    (home / "galaxy.toml").write_text(text.replace('population = "thick disc"', 'population = "thick.ecsv"'))
    return home / "galaxy.toml"


def test_a_run_keeps_the_populations_of_its_galaxy(own_galaxy):
    """The page is drawn from copies when the user's files are gone; run.json has a digest of each."""
    done = steps.predict(DEMO, galaxy=own_galaxy, run="own")
    names = [Path(entry["path"]).name for entry in done.record["provenance"]["inputs"]]
    assert {"galaxy.toml", "old.toml", "own.fits", "thick.ecsv"} <= set(names)
    for path in (own_galaxy, *own_galaxy.parent.glob("*.toml"), *own_galaxy.parent.glob("tables/*")):
        path.unlink(missing_ok=True)
    again = steps.report("own")
    np.testing.assert_array_equal(again.prediction.groups["wide"].expected, done.prediction.groups["wide"].expected)


def test_a_galaxy_without_files_is_kept_byte_by_byte():
    """Comments and all."""
    done = steps.predict(DEMO, galaxy="juric-2008")
    assert (done.folder / "inputs" / "galaxy.toml").read_bytes() == (PUBLISHED / "juric-2008.toml").read_bytes()


def test_a_population_is_found_in_a_galaxy_by_its_file(own_galaxy):
    """However its path is written, and with the Galaxy's files among the inputs."""
    run = steps.population(own_galaxy.parent / "tables" / ".." / "old.toml", galaxy=own_galaxy, band="V")
    assert [part["name"] for part in run.record["result"]["components"]] == ["halo"]
    names = [Path(entry["path"]).name for entry in run.record["provenance"]["inputs"]]
    assert {"galaxy.toml", "old.toml", "own.fits", "thick.ecsv"} <= set(names)


@pytest.mark.parametrize(
    ("given", "said"),
    [
        ("comets", "'comets'; expected one of bulge, census, halo, thick disc, or the path of a file"),
        ("RR Lyrae", "'RR Lyrae', left out (their share"),
        ("gone.toml", "'gone.toml', no such file"),
    ],
)
def test_an_unknown_population_names_file_and_key(given, said, capsys):
    """Wherever a Galaxy is read: a prediction, a population."""
    text = (PUBLISHED / "default.toml").read_text()
    Path("g.toml").write_text(text.replace('population = "halo"', f'population = "{given}"'))
    for arguments in (["predict", str(DEMO)], ["population", "census"]):
        assert main([*arguments, "--galaxy", "g.toml"]) == 2
        assert f"g.toml: component 'halo'.population: {said}" in capsys.readouterr().err


def test_a_wrong_free_name_is_found_before_anything_is_put_together(monkeypatch, capsys):
    """Before the survey is read, and with the name that may be meant."""
    monkeypatch.setattr(steps.inputs, "read_survey", None)
    assert main(["fit", str(DEMO), "--free", "thin.h_z_kpc,thin.h_q_kpc"]) == 2
    said = capsys.readouterr().err
    assert said.startswith("starcount: free parameter 'thin.h_q_kpc': not in Galaxy 'default'; expected 'thin.h_")


def test_bands_left_out_are_refused_with_the_reason(coloured, capsys):
    """In every step that reads a survey."""
    path = coloured / "survey.toml"
    path.write_text(path.read_text().replace('"BP"', '"U"'))
    assert main(["check", str(coloured)]) == 2
    assert "colour: 'U', left out (the loci hold U only on the way" in capsys.readouterr().err


def test_reporting_twice_leaves_one_page():
    """A page is replaced whole, and the tables of the run stay as they were."""
    done = steps.predict(DEMO, run="twice")
    before = (done.folder / "fields.ecsv").read_bytes()
    steps.report("twice")
    steps.report("twice")
    assert (done.folder / "fields.ecsv").read_bytes() == before
    assert sorted(path.name for path in Path("outputs").iterdir()) == ["twice"]


def test_count_shows_the_groups_with_their_colours(coloured, capsys):
    """After counting, the table of ``check`` with the new numbers of stars."""
    Path("stars.csv").write_text("l,b,Gmag,BPmag,RPmag\n10.0,20.0,13.0,13.5,12.9\n10.0,20.0,13.0,14.5,12.9\n")
    assert main(["count", str(coloured), "stars.csv", "--out", "counted"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert any(line.startswith("one") and "BP-RP, 2 from all bluer" in line and line.endswith(" 2") for line in lines)


def test_count_writes_a_survey_that_can_be_fitted():
    """Stars put into known fields come back as counts in the survey that is written."""
    fields = read_survey(DEMO).groups[1].fields
    lines = ["l,b,Vmag"] + [
        f"{l},{b},{10.5 + i}" for i, (l, b) in enumerate(zip(fields.l_deg, fields.b_deg, strict=True))
    ]
    Path("stars.csv").write_text("\n".join([*lines, f"{fields.l_deg[0]},{fields.b_deg[0]},"]) + "\n")
    done = steps.count(DEMO, ["stars.csv"], group="visual", out="counted")
    counted = read_survey("counted")
    np.testing.assert_array_equal(counted.groups[1].counts.sum(axis=1)[:5], 1)
    np.testing.assert_array_equal(counted.groups[0].counts, read_survey(DEMO).groups[0].counts)
    result = done.record["result"]
    assert result["rows"] == 7
    assert result["dropped"]["magnitude missing"] == 1
    assert result["rows"] == result["counted"] + sum(result["dropped"].values())


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["predict", "nowhere"], "nowhere"),
        (["predict", str(DEMO), "--galaxy", "andromeda"], "andromeda"),
        (["predict", str(DEMO), "--run", "../up"], "run name '../up'"),
        (["fit", str(DEMO), "--free", "thin.h_q_kpc"], "thin.h_q_kpc"),
        (["report", "nowhere"], "nowhere: not a run"),
        (["count", str(DEMO), "nowhere.fits"], "nowhere.fits"),
    ],
)
def test_bad_input_is_one_line_and_nothing_is_written(arguments, said, capsys):
    """Status 2, one line that names what is wrong, and no trace in the outputs folder."""
    assert main(arguments) == 2
    lines = [line for line in capsys.readouterr().err.splitlines() if line.startswith("starcount: ")]
    assert len(lines) == 1
    assert said in lines[0]
    assert not Path("outputs").exists()


def test_a_count_is_not_a_run_to_draw():
    """``report`` says which runs have a page."""
    Path("stars.csv").write_text("l,b,Vmag\n5.0,-38.0,10\n")
    steps.count(DEMO, ["stars.csv"], group="visual")
    with pytest.raises(InputError, match="made by 'count'; expected a run of predict"):
        steps.report("demo-counts")


def test_an_unknown_galaxy_lists_those_there_are():
    """The message says what would work."""
    with pytest.raises(UnknownName, match=r"known: .*default"):
        steps.predict(DEMO, galaxy="andromeda")


def test_json_is_alone_on_standard_output(capsys):
    """A pipe can parse what a command prints."""
    assert main(["predict", str(DEMO), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["step"] == "predict"
