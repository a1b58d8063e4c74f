"""Small invented surveys as hand-made files, for the tests to read and to spoil; and what makes two surveys equal."""

import dataclasses
from pathlib import Path

import numpy as np

SURVEY = """\
format = 1
name = "two circles and a pixel"
description = "invented"
invented = true

[[group]]
name = "bright"
band = "G"
bins = {from = 10, to = 12, step = 0.5}
fields = "fields.ecsv"
counts = "counts.ecsv"
completeness = "completeness.ecsv"
photometric_error = "errors.ecsv"
profiles = "profiles.ecsv"
extra = ["quasars"]
"""

FIELDS = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: name, datatype: string}
# - {name: l, unit: deg, datatype: float64}
# - {name: b, unit: deg, datatype: float64}
# - {name: area, unit: deg2, datatype: float64}
# - {name: radius, unit: deg, datatype: float64}
# - {name: nside, datatype: int64}
# - {name: pixel, datatype: int64}
# - {name: frame, datatype: string}
# - {name: order, datatype: string}
# - {name: dust, datatype: string}
# - {name: A_V, unit: mag, datatype: float64}
# - {name: profile, datatype: string}
# schema: astropy-2.0
name l b area radius nside pixel frame order dust A_V profile
pole 0.0 90.0 3.1415 1.0 "" "" "" "" D0 "" ""
centre 359.0 -5.0 0.785 0.5 "" "" "" "" constant 1.5 ""
tile "" "" 50.0 "" 8 3 icrs nested profile "" cloud
"""

COUNTS = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: field, datatype: string}
# - {name: m_lo, unit: mag, datatype: float64}
# - {name: m_hi, unit: mag, datatype: float64}
# - {name: n, datatype: int64}
# schema: astropy-2.0
field m_lo m_hi n
pole 10.0 10.5 4
pole 10.5 11.0 7
centre 11.0 11.5 130
tile 11.5 12.0 900
"""

COMPLETENESS = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: m, unit: mag, datatype: float64}
# - {name: completeness, datatype: float64}
# schema: astropy-2.0
m completeness
9.0 0.5
10.0 1.0
13.0 0.9
"""

ERRORS = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: m, unit: mag, datatype: float64}
# - {name: offset, unit: mag, datatype: float64}
# - {name: scatter, unit: mag, datatype: float64}
# schema: astropy-2.0
m offset scatter
9.0 0.0 0.02
13.0 0.01 0.1
"""

PROFILES = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: profile, datatype: string}
# - {name: d, unit: kpc, datatype: float64}
# - {name: A_V, unit: mag, datatype: float64}
# schema: astropy-2.0
profile d A_V
cloud 0.0 0.0
cloud 0.5 1.2
"""

FILES = {
    "survey.toml": SURVEY,
    "fields.ecsv": FIELDS,
    "counts.ecsv": COUNTS,
    "completeness.ecsv": COMPLETENESS,
    "errors.ecsv": ERRORS,
    "profiles.ecsv": PROFILES,
}

SURVEY_IN_COLOUR = """\
format = 1
name = "one circle in magnitude and colour"
description = "invented"
invented = true

[[group]]
name = "faint"
band = "G"
edges_mag = [18, 20, 20.5]
colour = ["BP", "RP"]
edges_colour_mag = [-inf, 0.5, 1.5, inf]
fields = "fields.ecsv"
counts = "counts.ecsv"
completeness = "completeness.ecsv"
colour_error = "errors.ecsv"
faint_BP_noise = 40
resolution_arcsec = 0.5
"""

ONE_FIELD = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: name, datatype: string}
# - {name: l, unit: deg, datatype: float64}
# - {name: b, unit: deg, datatype: float64}
# - {name: area, unit: deg2, datatype: float64}
# - {name: radius, unit: deg, datatype: float64}
# schema: astropy-2.0
name l b area radius
pole 0.0 90.0 3.1415 1.0
"""

COUNTS_IN_COLOUR = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: field, datatype: string}
# - {name: m_lo, unit: mag, datatype: float64}
# - {name: m_hi, unit: mag, datatype: float64}
# - {name: c_lo, unit: mag, datatype: float64}
# - {name: c_hi, unit: mag, datatype: float64}
# - {name: n, datatype: int64}
# schema: astropy-2.0
field m_lo m_hi c_lo c_hi n
pole 18.0 20.0 -inf 0.5 3
pole 18.0 20.0 0.5 1.5 40
pole 20.0 20.5 1.5 inf 7
"""

COMPLETENESS_IN_COLOUR = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: m, unit: mag, datatype: float64}
# - {name: c, unit: mag, datatype: float64}
# - {name: completeness, datatype: float64}
# schema: astropy-2.0
m c completeness
17.0 0.0 1.0
17.0 2.0 1.0
21.0 2.0 0.4
21.0 0.0 0.8
"""

COLOUR_ERRORS = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: m, unit: mag, datatype: float64}
# - {name: c, unit: mag, datatype: float64}
# - {name: offset, unit: mag, datatype: float64}
# - {name: scatter, unit: mag, datatype: float64}
# schema: astropy-2.0
m c offset scatter
18.0 0.0 0.00 0.05
18.0 1.0 0.01 0.06
18.0 3.0 0.02 0.10
21.0 0.0 0.03 0.25
21.0 1.0 0.04 0.30
21.0 3.0 0.05 0.50
"""

FILES_IN_COLOUR = {
    "survey.toml": SURVEY_IN_COLOUR,
    "fields.ecsv": ONE_FIELD,
    "counts.ecsv": COUNTS_IN_COLOUR,
    "completeness.ecsv": COMPLETENESS_IN_COLOUR,
    "errors.ecsv": COLOUR_ERRORS,
}


def lay_out(folder: Path, files: dict[str, str] = FILES, **changed: tuple[str, str]) -> Path:
    """Write a survey's files, with one text replaced in some of them (by name without ending)."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, text in files.items():
        old, new = changed.get(name.split(".")[0], ("", ""))
        assert old in text
        (folder / name).write_text(text.replace(old, new, 1) if old else text, encoding="utf-8")
    return folder


def differences(one, other, where: str = "survey") -> list[str]:
    """Where two surveys (or parts of them) differ; paths of files do not count."""
    if type(one) is not type(other):
        return [where]
    if dataclasses.is_dataclass(one):
        names = [f.name for f in dataclasses.fields(one) if f.name != "path"]
        return [d for n in names for d in differences(getattr(one, n), getattr(other, n), f"{where}.{n}")]
    if isinstance(one, np.ndarray):
        same = one.shape == other.shape and one.dtype.kind == other.dtype.kind
        return [] if same and np.array_equal(one, other, equal_nan=one.dtype.kind == "f") else [where]
    if isinstance(one, dict):
        one, other = tuple(one.items()), tuple(other.items())
    if isinstance(one, tuple):
        if len(one) != len(other):
            return [where]
        return [d for i, pair in enumerate(zip(one, other, strict=True)) for d in differences(*pair, f"{where}[{i}]")]
    return [] if one == other else [where]
