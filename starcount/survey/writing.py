"""Writing a survey: the same survey always gives the same bytes, and reads back equal."""

import io
from pathlib import Path

import astropy.units as u
import numpy as np
import tomli_w
from astropy.table import Column, MaskedColumn, Table

from starcount.files import write_text
from starcount.survey.bin_settings import COLOUR, MAGNITUDE
from starcount.survey.bins import edges_from_range
from starcount.survey.fields import Fields
from starcount.survey.group_settings import is_path
from starcount.survey.groups import Group, Survey
from starcount.survey.reading import SETTINGS_FILE
from starcount.survey.settings import FORMAT


def write_survey(survey: Survey, folder: str | Path) -> Path:
    """Write survey.toml and its tables into ``folder`` and return the path of survey.toml.

    Positions are written in the Galactic frame whatever they were read in. The tables come first,
    survey.toml last: a folder that was interrupted does not look complete.
    """
    folder = Path(folder)
    blocks = [_head(survey)]
    for group in survey.groups:
        tables = _tables(group)
        names = {key: _file_name(survey, group, key) for key in tables}
        for key, table in tables.items():
            write_text(folder / names[key], _ecsv(table))
        blocks.append(_block(group, names, folder))
    write_text(folder / SETTINGS_FILE, "\n".join(blocks))
    return folder / SETTINGS_FILE


def _head(survey: Survey) -> str:
    keys = {"format": FORMAT, "name": survey.name, "description": survey.description, "invented": survey.invented}
    return tomli_w.dumps(keys)


def _block(group: Group, names: dict[str, str], folder: Path) -> str:
    text = "[[group]]\n" + tomli_w.dumps({"name": group.name, "band": group.band}) + _bins(group.edges_mag, MAGNITUDE)
    if group.colour is not None:
        text += tomli_w.dumps({"colour": group.colour}) + _bins(group.edges_colour_mag, COLOUR)
    bias = group.observation.faint_BP
    numbers = {"faint_BP_noise": bias and bias.noise_e_s, "resolution_arcsec": group.resolution_arcsec}
    text += tomli_w.dumps(names | {key: value for key, value in numbers.items() if value is not None})
    extra = [_from(folder, path) if is_path(path) else path for path in group.extra]
    return text + (tomli_w.dumps({"extra": extra}) if extra else "")


def _from(folder: Path, path: str) -> str:
    """A path inside the folder as seen from it, so that the folder can be moved; any other as it is."""
    folder = folder.resolve()
    return Path(path).relative_to(folder).as_posix() if Path(path).is_relative_to(folder) else path


def _bins(edges_mag: np.ndarray, keys: tuple[str, str]) -> str:
    """Bins as a range where that gives exactly these edges, else as a list."""
    start, stop = float(edges_mag[0]), float(edges_mag[-1])
    step = round((stop - start) / (edges_mag.size - 1), 10)
    if 0.0 < step < np.inf and np.array_equal(edges_from_range(start, stop, step), edges_mag):
        return f"{keys[0]} = {{ from = {start!r}, to = {stop!r}, step = {step!r} }}\n"
    return tomli_w.dumps({keys[1]: edges_mag.tolist()})


def _file_name(survey: Survey, group: Group, key: str) -> str:
    alone = len(survey.groups) == 1
    return f"{key}.ecsv" if alone else f"{group.name}-{key}.ecsv"


def _tables(group: Group) -> dict[str, Table]:
    """The tables of a group by their key in survey.toml, only those it has."""
    tables = {"fields": _field_table(group.fields)}
    if group.counts is not None:
        tables["counts"] = _count_table(group)
    seen = group.observation
    if seen.completeness is not None:
        share = Column(seen.completeness.share.ravel(), "completeness")
        tables["completeness"] = Table([*_axes(seen.completeness), share])
    for key, error in (("photometric_error", seen.error), ("colour_error", seen.colour_error)):
        if error is not None:
            columns = (error.offset_mag, "offset"), (error.scatter_mag, "scatter")
            tables[key] = Table([*_axes(error), *(_mag(values.ravel(), name) for values, name in columns)])
    if group.profiles:
        tables["profiles"] = _profile_table(group.profiles)
    return tables


def _axes(curves) -> list[Column]:
    """The column m and, where the curves depend on colour, c: a row for every pair, magnitude before colour."""
    c_mag = getattr(curves, "c_mag", None)
    if c_mag is None:
        return [_mag(curves.m_mag, "m")]
    m_mag, c_mag = np.meshgrid(curves.m_mag, c_mag, indexing="ij")
    return [_mag(m_mag.ravel(), "m"), _mag(c_mag.ravel(), "c")]


def _mag(values, name: str) -> Column:
    return Column(values, name, unit=u.mag)


def _field_table(fields: Fields) -> Table:
    """Columns that no field uses are left out; cells a field does not use are blank."""
    circle, pixel = ~fields.is_pixel, fields.is_pixel
    columns = [
        Column(fields.name, "name"),
        Column(fields.l_deg, "l", unit=u.deg),
        Column(fields.b_deg, "b", unit=u.deg),
        Column(fields.area_deg2, "area", unit=u.deg**2),
        _used(fields.radius_deg, "radius", circle, u.deg),
        _used(fields.nside, "nside", pixel),
        _used(fields.pixel, "pixel", pixel),
        _used(fields.pixel_frame, "frame", pixel),
        _used(fields.pixel_order, "order", pixel),
        Column(fields.dust, "dust"),
        _used(fields.A_V_mag, "A_V", np.isfinite(fields.A_V_mag), u.mag),
        _used(fields.profile, "profile", fields.profile != ""),
        _used(fields.note, "note", fields.note != ""),
    ]
    return Table([column for column in columns if column is not None])


def _used(values, name: str, used: np.ndarray, unit: u.Unit | None = None) -> Column | None:
    if used.all():
        return Column(values, name, unit=unit)
    return MaskedColumn(values, name, mask=~used, unit=unit) if used.any() else None


def _count_table(group: Group) -> Table:
    field, column = np.nonzero(group.used)
    names = ("m_lo", "m_hi") if group.colour is None else ("m_lo", "m_hi", "c_lo", "c_hi")
    limits = [_mag(getattr(group.bins, name)[column], name) for name in names]
    return Table([Column(group.fields.name[field], "field"), *limits, Column(group.counts[field, column], "n")])


def _profile_table(profiles) -> Table:
    name = np.repeat(list(profiles), [d_kpc.size for d_kpc, _ in profiles.values()])
    d_kpc, A_V_mag = (np.concatenate(columns) for columns in zip(*profiles.values(), strict=True))
    return Table([Column(name, "profile"), Column(d_kpc, "d", unit=u.kpc), _mag(A_V_mag, "A_V")])


def _ecsv(table: Table) -> str:
    text = io.StringIO()
    table.write(text, format="ascii.ecsv")
    return text.getvalue().replace("\r\n", "\n")
