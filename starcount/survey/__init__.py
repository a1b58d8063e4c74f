"""Surveys: groups of fields with their bins, counts and observation model; reading, checking, writing."""

from starcount.survey.bins import Bins, edges_from_range
from starcount.survey.curves import ColourError, Completeness, PhotometricError
from starcount.survey.faint_BP import FaintBP
from starcount.survey.fields import Fields, circle_fields, pixel_fields
from starcount.survey.frames import galactic_from_icrs
from starcount.survey.groups import EXTRA_TABLES, Group, Survey, make_group
from starcount.survey.observation import Observation
from starcount.survey.overlap import overlapping_fields
from starcount.survey.reading import read_survey
from starcount.survey.sight_lines import SightLines, sight_lines
from starcount.survey.writing import write_survey

__all__ = [
    "EXTRA_TABLES",
    "Bins",
    "ColourError",
    "Completeness",
    "FaintBP",
    "Fields",
    "Group",
    "Observation",
    "PhotometricError",
    "SightLines",
    "Survey",
    "circle_fields",
    "edges_from_range",
    "galactic_from_icrs",
    "make_group",
    "overlapping_fields",
    "pixel_fields",
    "read_survey",
    "sight_lines",
    "write_survey",
]
