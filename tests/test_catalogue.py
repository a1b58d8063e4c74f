"""Counting star lists: sky pixels, circles, frames and bins against independent code."""

import astropy.units as u
import astropy_healpix
import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from astropy.coordinates import SkyCoord
from hypothesis import example, given, settings
from hypothesis import strategies as st
from invented_stars import all_sky, brute_force, invented_stars, survey, write, write_csv

from starcount.catalogue import count_catalogue, kernels
from starcount.catalogue.match import rotation
from starcount.survey.fields import Fields, circle_fields, pixel_fields
from starcount.survey.groups import Survey, make_group


def test_sine_and_cosine_equal_numpy():
    """Over more than the turn that positions may hold, to 3e-16: two roundings of a number below 1."""
    angles = np.concatenate([np.linspace(-7, 7, 20_001), np.arange(-8, 9) * np.pi / 4])
    ours = np.array([kernels.sine_cosine(angle) for angle in angles])
    np.testing.assert_allclose(ours, np.stack([np.sin(angles), np.cos(angles)], axis=1), rtol=0, atol=3e-16)


def test_direction_equals_numpy():
    """In all quadrants and on all axes, to 5e-16: one rounding of a number between 2 and 4; 0 at the poles."""
    angles = np.concatenate([np.linspace(-3.1, 3.1, 20_001), np.arange(-3, 4) * np.pi / 4])
    y, x = np.sin(angles), np.cos(angles)
    ours = [kernels.direction(*pair) for pair in zip(y, x, strict=True)]
    np.testing.assert_allclose(ours, np.arctan2(y, x), rtol=0, atol=5e-16)
    assert kernels.direction(0.0, 0.0) == 0.0


@pytest.mark.parametrize("order", [0, 1, 3, 8, 17, 29])
def test_nested_pixel_equals_astropy_healpix(order):
    """Our pixel numbers equal those of an independent library on random directions (none so near a border as 1e-15)."""
    rng = np.random.default_rng(order)
    lon, lat = rng.uniform(-7, 14, 3000), np.arcsin(rng.uniform(-1, 1, 3000))
    # At order 29 rounding of the angle itself (1e-15) crosses borders of pixels of 1e-9: 1e-5 of the stars may differ.
    ours = np.array([kernels.nested_pixel(order, np.sin(y), np.cos(y), x) for x, y in zip(lon, lat, strict=True)])
    theirs = astropy_healpix.lonlat_to_healpix(lon * u.rad, lat * u.rad, 2**order, order="nested")
    assert np.sum(ours != theirs) <= (1 if order == 29 else 0)


@pytest.mark.parametrize("lat", [-np.pi / 2, np.pi / 2, 0.0, np.arcsin(2 / 3), -np.arcsin(2 / 3)])
@pytest.mark.parametrize("quarter", [-4, -1, -1e-17, 0, 0.5, 1, 2, 3, 3.999999999999999, 4])
def test_nested_pixel_on_borders_touches_the_place(lat, quarter):
    """On the borders of faces, caps and quadrants the number is that of a pixel that touches the place."""
    lon, order = quarter * np.pi / 2, 5
    pixel = kernels.nested_pixel(order, np.sin(lat), np.cos(lat), lon)
    nearby = 1e-9 * np.array([(0, 0), (1, 0), (-1, 0), (0, 1), (0, -1), (1, 1), (1, -1), (-1, 1), (-1, -1)])
    around = [(lon + dx, np.clip(lat + dy, -np.pi / 2, np.pi / 2)) for dx, dy in nearby]
    if abs(abs(lat) - np.pi / 2) < 1e-8:
        around = [(x, np.sign(lat) * (np.pi / 2 - 1e-9)) for x in np.arange(0.1, 6.2, 1.5)]
    x, y = np.transpose(around)
    assert pixel in astropy_healpix.lonlat_to_healpix(x * u.rad, y * u.rad, 2**order, order="nested")


@settings(max_examples=200, derandomize=True, deadline=None)
@given(m=st.floats(8, 18), step=st.lists(st.floats(1e-3, 3), min_size=1, max_size=12))
@example(m=10.0, step=[1.0])
@example(m=11.0, step=[1.0])
@example(m=10.3, step=[0.1, 0.1, 0.1, 0.1, 0.1])
def test_bins_are_closed_left_and_open_right(m, step):
    """The bin is that of numpy's binary search, for equal and unequal bins and on the edges themselves."""
    edges = 10.0 + np.concatenate([[0], np.cumsum(step)])
    for star in (m, *edges):
        expected = np.searchsorted(edges, star, side="right") - 1
        assert kernels.bin_of(star, edges) == (expected if expected < len(step) else -1)


def test_rotation_puts_the_galactic_pole_where_the_iau_defined_it():
    """b = 90 lies at ra 192.85948, dec 27.12825 deg (ESA 1997, The Hipparcos Catalogue, 1.5.3); printed to 1e-5."""
    x, y, z = rotation("galactic", "icrs") @ [0, 0, 1]
    assert np.degrees(np.arctan2(y, x)) % 360 == pytest.approx(192.85948, abs=1e-5)
    assert np.degrees(np.arcsin(z)) == pytest.approx(27.12825, abs=1e-5)


@pytest.mark.parametrize(("b_deg", "pixels"), [(90.0, range(4)), (-90.0, range(8, 12))])
def test_stars_at_a_pole_are_counted_once(b_deg, pixels, tmp_path):
    """At l, b of a pole, and at the ICRS place of the Galactic pole, a star falls in one of the four pixels there."""
    pole = SkyCoord(0, b_deg, unit=u.deg, frame="galactic").icrs
    for text in (f"l,b,G\n123,{b_deg},10\n", f"ra,dec,G\n{pole.ra.deg},{pole.dec.deg},10\n"):
        counted = count_catalogue(write_csv(tmp_path / "s.csv", text), survey(all_sky(1)))
        assert counted.counts["stars"].sum() == counted.counts["stars"][pixels].sum() == 1


def joined(*parts: Fields) -> Fields:
    columns = Fields.__dataclass_fields__
    return Fields(**{name: np.concatenate([getattr(part, name) for part in parts]) for name in columns})


MIXED_FIELDS = {
    "galactic ring": lambda: all_sky(4),
    "icrs nested": lambda: all_sky(2, "icrs", "nested"),
    "deep pixels": lambda: pixel_fields(list("abcd"), 1024, [5, 800_000, 6_000_000, 12_582_911], "galactic", "nested"),
    "circles, overlapping, poles, all sky": lambda: circle_fields(
        list("abcdef"), [0, 1, 120, 0, 359.9, 77], [90, 89, -30, -90, 0, 0], [1.0, 5.0, 20.0, 0.4, 3.0, 180.0]
    ),
    "circles with pixels of two frames and depths": lambda: joined(
        circle_fields(["c"], [10], [-60], [30]), all_sky(1, "icrs", "ring"), all_sky(8, "galactic", "nested")
    ),
}


@pytest.mark.parametrize("fields", MIXED_FIELDS.values(), ids=MIXED_FIELDS)
def test_counts_equal_brute_force(fields, tmp_path):
    """Every star is counted in all its fields and no other; the twin shares no code with the table of candidates."""
    stars, fields = invented_stars(20_000), fields()
    if fields.nside.max() > 512:  # few stars fall in small pixels by chance: move some there
        stars["ra"][:4], stars["dec"][:4] = icrs_of(fields)
    counted = count_catalogue(write(stars, tmp_path / "stars.fits"), survey(fields))
    np.testing.assert_array_equal(counted.counts["stars"], brute_force(stars, fields))
    assert counted.rows == counted.counted + sum(counted.dropped.values()) == len(stars)


def icrs_of(fields: Fields):
    places = SkyCoord(fields.l_deg, fields.b_deg, unit=u.deg, frame="galactic").icrs
    return places.ra.deg, places.dec.deg


def test_galactic_columns_win_unless_the_user_names_others(tmp_path):
    """With both frames in a file l, b are used; naming ra, dec switches; radians and degrees give the same."""
    stars = invented_stars(3000)
    galactic = SkyCoord(stars["ra"], stars["dec"]).galactic
    stars["l"], stars["b"] = galactic.l.to(u.rad), galactic.b.to(u.rad)
    path = write(stars, tmp_path / "stars.ecsv")
    default = count_catalogue(path, survey(all_sky()))
    named = count_catalogue(path, survey(all_sky()), columns={"ra": "ra", "dec": "dec"})
    assert default.columns == {"l": "l", "b": "b", "mag": "Gmag"}
    assert named.columns["ra"] == "ra"
    np.testing.assert_array_equal(default.counts["stars"], named.counts["stars"])


def test_groups_are_counted_in_one_pass_and_rows_once(tmp_path):
    """Two groups with their own bins: a row is dropped only if no group takes it."""
    text = "l,b,G\n0,0,5\n0,0,15\n0,0,25\n0,0,\n"
    groups = [make_group(name, "G", edges, all_sky(1)) for name, edges in (("bright", [0, 10]), ("faint", [10, 20]))]
    path, both = write_csv(tmp_path / "s.csv", text), Survey("invented", "", True, tuple(groups))
    counted = count_catalogue(path, both)
    assert {name: n.sum() for name, n in counted.counts.items()} == {"bright": 1, "faint": 1}
    assert (counted.rows, counted.counted, counted.dropped["outside the bins"]) == (4, 2, 1)
    assert counted.dropped["magnitude missing"] == 1
    assert list(count_catalogue(path, both, group="faint").counts) == ["faint"]


def test_progress_ends_at_the_size_of_the_files(tmp_path):
    """The callback sees bytes read grow to all bytes."""
    paths = [write(invented_stars(100, seed=k), tmp_path / f"s{k}.csv") for k in (1, 2)]
    seen = []
    count_catalogue(paths, survey(all_sky()), progress=lambda done, total: seen.append((done, total)))
    size = sum(path.stat().st_size for path in paths)
    assert seen == sorted(seen)
    assert seen[-1] == (size, size)


def test_single_precision_magnitudes_fall_in_the_bins_of_their_decimals(tmp_path):
    """10.2 in single precision is 10.1999998 in double; it opens the bin at 10.2 all the same, and so for cuts."""
    m = np.array([10.2, 10.1, 10.0], dtype="f4")
    pq.write_table(pa.table({"l": np.zeros(3), "b": np.zeros(3), "G": m}), tmp_path / "s.parquet")
    counted = count_catalogue(tmp_path / "s.parquet", survey(all_sky(1), [10.0, 10.1, 10.2, 10.3]), cuts=["G >= 10.1"])
    assert counted.counts["stars"].sum(axis=0).tolist() == [0, 1, 1]
