"""Density laws, frame and Galaxies against printed values, closed forms and independent libraries."""

import numpy as np
import pytest
import twin
from numpy.testing import assert_allclose
from scipy.integrate import dblquad, quad

from starcount.errors import Problems, UnknownName
from starcount.galaxy import LAWS, law, published_names, read_galaxy
from starcount.galaxy.frame import galactocentric

R0, Z0 = 8.178, 0.0208
TYPICAL = {
    "disc": [2.6, 0.3, 1.4, 12.0, 0.8, 0.0],
    "halo": [2.75, 0.65, 0.5],
    "bar": [1.58, 0.62, 0.43, 27.0],
    "uniform": [],
}
PLACES = np.array([(8.2, 0.1, 0.02), (4.0, -1.2, 1.0), (12.0, 2.5, -0.4), (0.7, 0.6, 0.2), (1.5, -2.8, -3.0)]).T


def relative(name, theta, R, z, phi=0.0):
    """Density relative to the Sun."""
    return np.exp(law(name)(theta, R, phi, z) - law(name)(theta, np.sqrt(R0**2 - Z0**2), 0.0, Z0))


@pytest.mark.parametrize("name", LAWS)
def test_every_slope_is_the_derivative_of_the_law(name):
    """Central differences with a step of 1e-5; 2e-7 is their rounding error."""
    theta = np.array(TYPICAL[name])
    found = law(name).derivatives(theta, *PLACES)
    for p, parameter in enumerate(law(name).parameters):
        if not parameter.fittable:
            assert_allclose(found[p], 0.0)
            continue
        step = np.where(np.arange(theta.size) == p, 1e-5, 0.0)
        numeric = (law(name)(theta + step, *PLACES) - law(name)(theta - step, *PLACES)) / 2e-5
        assert_allclose(found[p], numeric, rtol=2e-7, atol=2e-7, err_msg=parameter.name)
    for i in range(3):
        step = 1e-5 * np.eye(3)[i][:, None]
        numeric = (law(name)(theta, *(PLACES + step)) - law(name)(theta, *(PLACES - step))) / 2e-5
        assert_allclose(found[theta.size + i], numeric, rtol=2e-7, atol=2e-7)


@pytest.mark.parametrize("vertical", [1.0, 2.0])
def test_the_vertical_family_has_its_own_slopes(vertical):
    """sech^2 and sech against central differences."""
    theta = np.array([2.6, 0.3, 0.0, 1000.0, 1.0, vertical])
    step = np.array([0, 1e-6, 0, 0, 0, 0])
    numeric = (law("disc")(theta + step, *PLACES) - law("disc")(theta - step, *PLACES)) / 2e-6
    assert_allclose(law("disc").derivatives(theta, *PLACES)[1], numeric, rtol=1e-6, atol=1e-7)


# Relative to the Sun at z0 = 20.8 pc, R0 = 8.178 kpc; computed independently in plain numpy for a reference sheet,
# four printed digits. Columns: (R0, 0), (R0, 0.3), (R0, 1), (R0, 3), (4, 0), (4, 1), (12, 0), (12, 1).
_AT = np.array([(R0, 0), (R0, 0.3), (R0, 1), (R0, 3), (4, 0), (4, 1), (12, 0), (12, 1)]).T
DISCS = {
    (2.6, 0.3, 0.0, 0.0): [1.072, 0.3943, 0.03824, 4.866e-5, 5.346, 0.1907, 0.2464, 8.791e-3],
    (2.6, 0.3, 0.0, 2.0): [1.002, 0.6496, 0.07143, 9.102e-5, 4.999, 0.3562, 0.2305, 0.01642],
    (2.6, 0.3, 0.0, 1.0): [1.001, 0.7874, 0.1332, 1.818e-4, 4.993, 0.6643, 0.2302, 0.03062],
    (2.0, 0.3, 2.7, 0.0): [1.072, 0.3943, 0.03824, 4.866e-5, 6.132, 0.2187, 0.1761, 6.283e-3],
    (3.6, 0.9, 0.0, 0.0): [1.023, 0.7333, 0.3369, 0.03651, 3.266, 1.075, 0.3540, 0.1165],
}


@pytest.mark.parametrize("scales", DISCS)
def test_disc_values(scales):
    """Half a unit of the fourth printed digit: 7e-4."""
    h_R, h_z, hole, vertical = scales
    assert_allclose(relative("disc", [h_R, h_z, hole, 1000, 1, vertical], *_AT), DISCS[scales], rtol=7e-4)


def test_halo_values():
    """Power law 2.77, q 0.64, with a core of 1 kpc (Juric et al. 2008's shape): four printed digits."""
    at = np.array([(R0, 1), (R0, 5), (R0, 10), (4, 3), (15, 0), (0.1, 8.178), (20, 20)]).T
    expected = [0.9523, 0.4113, 0.1209, 2.157, 0.1890, 0.2940, 0.01546]
    assert_allclose(relative("halo", [2.77, 0.64, 1.0], *at), expected, rtol=4e-4)


def test_the_bars_near_end_is_at_positive_longitude():
    """G2 (Dwek et al. 1995; lengths of Han & Gould 1995), alpha 27: a wrong sign swaps the first two, a factor 18."""
    l, b, d = np.array([(8.08, 0, 6.460), (-8.08, 0, 6.460), (5, -3, 7.5), (-5, -3, 9.0), (0, -6, 8.178)]).T
    expected = [0.44877, 0.02516, 0.61379, 0.49076, 0.13869]
    R, phi, z = galactocentric(l, b, d, R0, Z0)
    assert_allclose(np.exp(law("bar")(TYPICAL["bar"], R, phi, z)), expected, rtol=2e-4)  # five printed digits


@pytest.mark.parametrize(("vertical", "column"), [(1.0, 4.0), (2.0, np.pi), (0.0, 2.0)])
def test_columns_through_the_disc(vertical, column):
    """Sigma / (n(0) h_z) = 4, pi, 2 for sech^2, sech and exponential: closed forms."""
    theta = [2.6, 0.3, 0.0, 1000.0, 1.0, vertical]
    found = (
        2 * quad(lambda z: float(np.exp(law("disc")(theta, R0, 0.0, z) - law("disc")(theta, R0, 0.0, 0.0))), 0, 20)[0]
    )
    assert_allclose(found / 0.3, column, rtol=1e-7)


def test_the_bars_total():
    """Integral over space by quadrature in (P, Z), and 6.5725 pi x0 y0 z0 as printed for G2 (Dwek et al. 1995)."""
    x0, y0, z0, _ = TYPICAL["bar"]
    numeric = dblquad(lambda P, Z: np.pi * np.exp(-0.5 * np.hypot(P, Z**2)), 0, 8, 0, 120, epsrel=1e-6)[0] * 2
    total, slopes = law("bar").total(TYPICAL["bar"])
    assert_allclose(np.exp(total), numeric * x0 * y0 * z0, rtol=1e-5)
    assert_allclose(np.exp(total), 6.5725 * np.pi * x0 * y0 * z0, rtol=1e-4)
    assert_allclose(slopes, [1 / x0, 1 / y0, 1 / z0, 0.0])


def test_the_frame_is_astropys():
    """Independent of our signs. 5e-5 kpc: astropy's direction of the centre is rounded, 2e-6 rad at 20 kpc."""
    rng = np.random.default_rng(1)
    l, b, d = rng.uniform(0, 360, 50), rng.uniform(-90, 90, 50), rng.uniform(0.1, 20, 50)
    R, phi, z = galactocentric(l, b, d, R0, Z0)
    assert_allclose(
        (R, phi, z), np.array([twin.tilted(*row, R0, Z0) for row in zip(l, b, d, strict=True)]).T, atol=1e-12
    )
    R2, phi2, z2 = (
        np.array(x) for x in zip(*(twin.galactocentric(*row, R0, Z0) for row in zip(l, b, d, strict=True)), strict=True)
    )
    assert_allclose(R, R2[:, 0], atol=5e-5)
    assert_allclose(z, z2[:, 0], atol=5e-5)
    assert_allclose(R * np.sin(phi), (R2 * np.sin(phi2))[:, 0], atol=5e-5)


def test_azimuth_grows_with_rotation():
    """At l = 90, b = 0, d = 5 kpc: R 9.58537, phi 31.4415 deg, z 0.02080 by hand; the Sun moves towards l = 90."""
    R, phi, z = galactocentric(90.0, 0.0, 5.0, R0, Z0)
    assert_allclose([R, np.degrees(phi), z], [9.58537, 31.4415, 0.02080], atol=5e-5)


def test_the_default_components_at_printed_places():
    """Sum of thin (2.6, 0.30), thick (2.5, 0.85, share 0.09) and halo (2.75, 0.65, 0.5, share 0.002), by hand."""
    thin, thick, halo = [2.6, 0.3, 0, 1000, 1, 0], [2.5, 0.85, 0, 1000, 1, 0], [2.75, 0.65, 0.5]
    for R, z, total in [
        (R0, 0.5, 0.25563),
        (R0, 2.0, 0.011802),
        (5, 0.5, 0.87729),
        (12, 0.5, 0.058343),
        (15, 5, 2.915e-4),
    ]:
        found = (
            relative("disc", thin, R, z) + 0.09 * relative("disc", thick, R, z) + 0.002 * relative("halo", halo, R, z)
        )
        assert_allclose(found, total, rtol=2e-4)


@pytest.mark.parametrize("name", published_names())
def test_published_galaxies_are_complete(name):
    """Every number has a reference, and lies in its support; shares of the census sum to it."""
    galaxy = read_galaxy(name)
    for parameter in galaxy.parameters.values():
        assert parameter.reference, parameter.name
        assert parameter.lower <= parameter.value <= parameter.upper, parameter.name
    amplitudes = galaxy.amplitudes(galaxy.values)
    assert_allclose(sum(amplitudes[n] for n in ("thin", "thick", "halo")), galaxy.values["census.density_pc3"])


def test_published_values():
    """Chang et al. 2011 and Juric et al. 2008 as printed in their abstracts."""
    chang, juric = read_galaxy("chang-2011").values, read_galaxy("juric-2008").values
    names = (
        "thin.h_R_kpc",
        "thin.h_z_kpc",
        "thick.h_R_kpc",
        "thick.h_z_kpc",
        "thick.share",
        "halo.gamma",
        "halo.q",
        "halo.share",
    )
    assert [chang[n] for n in names] == [3.7, 0.36, 5.0, 1.02, 0.07, 2.6, 0.55, 0.002]
    assert [juric[n] for n in names] == [2.6, 0.30, 3.6, 0.90, 0.12, 2.8, 0.64, 0.005]


def test_a_wrong_galaxy_names_everything_that_is_wrong(tmp_path):
    """File, key, value and what is allowed, all at once."""
    text = (resource := read_galaxy.__globals__["PUBLISHED"] / "default.toml").read_text()
    assert resource.name == "default.toml"
    text = text.replace("h_R_kpc = { value = 2.6", "h_R_kpc = { value = -2.6").replace('law = "halo"', 'law = "hallo"')
    text = text.replace("R0_kpc", "RO_kpc").replace("alpha_deg = { value = 27.0", "alpha_deg = { value = nan")
    path = tmp_path / "mine.toml"
    path.write_text(text)
    with pytest.raises(Problems) as caught:
        read_galaxy(path)
    lines = str(caught.value).splitlines()
    assert all(line.startswith(f"{path}: ") for line in lines)
    for piece in (
        "thin.h_R_kpc.value: -2.6",
        "'hallo'; expected one of",
        "RO_kpc: an unknown key; expected 'R0_kpc'",
        "alpha_deg.value: nan",
    ):
        assert any(piece in line for line in lines), (piece, lines)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("error = 0.65", "lower = 3.0, error = 0.65", "thin.h_R_kpc.value: 2.6; expected a number from 3 to 20"),
        ("error = 0.65", "lower = 9.0, upper = 4.0, error = 0.65", "support from 9 to 4; expected lower < upper"),
        ('prior = "normal"', 'prior = "flat"', "'flat'; expected one of lognormal, normal"),
        ('amplitude = "remainder"', 'amplitude = "remander"', "'remander'; expected one of remainder, share"),
        (
            "ratios = { h_z_kpc = 0.5 }",
            "ratios = { h_z_kpc = 50 }",
            "component 'thin', layer 2.ratios.h_z_kpc: 50 times 0.3 is 15; expected a product from 0.01 to 5",
        ),
        ('population = "halo"', "population = 3", "component 'halo'.population: 3; expected a population's name"),
        (
            'population = "halo"',
            'population = "mine/old.toml"',
            "component 'halo'.population: 'mine/old.toml', no such file; expected a file, named from the folder",
        ),
        ("h_z_ratio", "h_z_ratio", None),
    ],
)
def test_wrong_entries_are_refused(tmp_path, old, new, message):
    """One line each; the unchanged file is read."""
    path = tmp_path / "mine.toml"
    path.write_text((read_galaxy.__globals__["PUBLISHED"] / "default.toml").read_text().replace(old, new))
    if message is None:
        assert read_galaxy(path).name == "default"
        return
    with pytest.raises(Problems, match=message.replace("(", r"\(")):
        read_galaxy(path)


def test_populations_are_looked_for_beside_the_galaxy(tmp_path, monkeypatch):
    """A file of a population is named from the Galaxy's own folder, wherever one works."""
    text = (read_galaxy.__globals__["PUBLISHED"] / "default.toml").read_text()
    (tmp_path / "mine" / "tables").mkdir(parents=True)
    (tmp_path / "mine" / "tables" / "old.ecsv").touch()
    path = tmp_path / "mine" / "galaxy.toml"
    path.write_text(text.replace('population = "halo"', 'population = "tables/old.ecsv"'))
    monkeypatch.chdir(tmp_path)
    found = {c.name: c.population for c in read_galaxy("mine/galaxy.toml").components}
    assert found == {"thin": "census", "thick": "thick disc", "halo": "mine/tables/old.ecsv", "bulge": "bulge"}


def test_only_populations_that_are_known_pass_where_they_are_given(tmp_path):
    """File, key, name, and the reason where one is left out on purpose; without a list of names any passes."""
    path = tmp_path / "mine.toml"
    text = (read_galaxy.__globals__["PUBLISHED"] / "default.toml").read_text()
    path.write_text(text.replace('population = "bulge"', 'population = "comets"'))
    assert read_galaxy(path).components[-1].population == "comets"
    known, absent = ("census", "halo", "thick disc"), {"comets": "no stars"}
    line = f"{path}: component 'bulge'.population: 'comets'"
    for reasons, middle in ((None, ""), (absent, ", left out (no stars)")):
        with pytest.raises(Problems) as caught:
            read_galaxy(path, populations=known, absent=reasons)
        assert str(caught.value).startswith(f"{line}{middle}; expected one of census, halo, thick disc, or the path")


def test_unknown_names():
    """A Galaxy or law that does not exist is answered with those that do."""
    with pytest.raises(UnknownName, match="no Galaxy called 'andromeda'; known: chang-2011, default, juric-2008"):
        read_galaxy("andromeda")
    with pytest.raises(UnknownName, match="no density law called 'spiral'; known: bar, disc, halo, uniform"):
        law("spiral")
