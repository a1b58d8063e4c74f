"""One [[group]] of survey.toml: its keys, and what is wrong with them."""

import math
import re
from collections.abc import Collection, Mapping
from dataclasses import dataclass
from pathlib import Path

from starcount.errors import Problem
from starcount.survey import faint_BP
from starcount.survey.bin_settings import trouble_with_bins
from starcount.survey.groups import EXTRA_TABLES
from starcount.survey.keys import NUMBER, NUMBERS, RANGE, TEXT, TEXTS, Place, trouble_with_keys, usable
from starcount.survey.spelling import one_of

GROUP = {
    "name": TEXT, "band": TEXT, "bins": RANGE, "edges_mag": NUMBERS, "colour": TEXTS, "colour_bins": RANGE,
    "edges_colour_mag": NUMBERS, "fields": TEXT, "counts": TEXT, "completeness": TEXT, "photometric_error": TEXT,
    "colour_error": TEXT, "faint_BP_noise": NUMBER, "resolution_arcsec": NUMBER, "extra": TEXTS, "profiles": TEXT,
}  # fmt: skip
REQUIRED = ("name", "band", "fields")
_NEED_COLOUR = ("colour_bins", "edges_colour_mag", "colour_error", "faint_BP_noise")
_POSITIVE = {"faint_BP_noise": "electrons per second", "resolution_arcsec": "arcsec"}
_TWO_BANDS = "two different bands, bluer first"
_NAME = re.compile(r"\w[\w .+-]*")


@dataclass(frozen=True)
class Bands:
    """The bands that may stand in a survey (None: any), and those left out on purpose with the reason.

    ``known`` as a mapping to objects with ``wavelength_nm`` also says which of two bands is the bluer one.
    """

    known: Collection[str] | None
    absent: Mapping[str, str]

    def problems(self, key: str, band: str, place: Place) -> list[Problem]:
        """What is wrong with a band, if anything."""
        if self.known is None or band in self.known:
            return []
        reason = f", left out ({self.absent[band]})" if band in self.absent else ""
        return [place.problem(key, repr(band) + reason, one_of(band, tuple(self.known)))]

    def trouble_with_order(self, blue: str, red: str) -> str:
        """In words, that the first of two known bands is not the bluer one; '' where it is, or nothing says so."""
        if not isinstance(self.known, Mapping):
            return ""
        blue_nm, red_nm = (self.known[band].wavelength_nm for band in (blue, red))
        return "" if blue_nm < red_nm else f"{blue!r} at {blue_nm:g} nm before {red!r} at {red_nm:g} nm"


def trouble_with_group(group: dict, place: Place, bands: Bands) -> list[Problem]:
    """Everything that is wrong with a group's settings."""
    if not isinstance(group, dict):
        return []
    problems = trouble_with_keys(group, GROUP, REQUIRED, place) + trouble_with_bins(group, place)
    name, band = usable(group, "name", TEXT), usable(group, "band", TEXT)
    if name and not _NAME.fullmatch(name):
        problems.append(place.problem("name", repr(name), "letters, digits, blanks and . _ + - (it names files)"))
    if band:
        problems += bands.problems("band", band, place)
    problems += _of_colour(group, place, bands)
    for key, unit in _POSITIVE.items():
        value = usable(group, key, NUMBER)
        if value is not None and not (value > 0.0 and math.isfinite(value)):
            problems.append(place.problem(key, f"{value:g}", f"a finite number of {unit} > 0"))
    return problems + _of_extra(group, place)


def is_path(extra: str) -> bool:
    """Whether an extra row is meant as a file: it has an ending or a folder."""
    return bool(Path(extra).suffix) or "/" in extra


def _of_colour(group: dict, place: Place, bands: Bands) -> list[Problem]:
    """What is wrong with the colour and with keys that need one."""
    if "colour" not in group:
        allowed = 'colour = ["BLUE", "RED"] with it'
        return [place.problem(key, "no colour", allowed) for key in _NEED_COLOUR if key in group]
    colour = usable(group, "colour", TEXTS)
    if colour is None:
        return []
    if len(colour) != 2 or colour[0] == colour[1] or "" in colour:
        return [place.problem("colour", repr(colour), _TWO_BANDS)]
    problems = [problem for band in colour for problem in bands.problems("colour", band, place)]
    turned = "" if problems else bands.trouble_with_order(*colour)
    if turned:
        problems.append(place.problem("colour", turned, _TWO_BANDS))
    band = usable(group, "band", TEXT)
    if "faint_BP_noise" in group and (colour != ["BP", "RP"] or band not in faint_BP.BANDS):
        found = f"colour {'-'.join(colour)} in band {band}"
        allowed = f"colour BP-RP in band {' or '.join(faint_BP.BANDS)}"
        problems.append(place.problem("faint_BP_noise", found, allowed))
    return problems


def _of_extra(group: dict, place: Place) -> list[Problem]:
    problems = []
    if group.get("extra") and "colour" in group:
        problems.append(place.problem("extra", f"{group['extra']} with a colour", "none: extra rows have no colours"))
    for extra in usable(group, "extra", TEXTS) or ():
        if extra not in EXTRA_TABLES and not is_path(extra):
            allowed = one_of(extra, EXTRA_TABLES) + " or the path of a table"
            problems.append(place.problem("extra", repr(extra), allowed))
        elif is_path(extra) and not (Path(place.file).parent / extra).is_file():
            allowed = "the path of a table, from the survey's folder"
            problems.append(place.problem("extra", f"no file {extra!r}", allowed))
    return problems
