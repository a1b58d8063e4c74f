"""survey.toml: what may stand in it, checked key by key with the line of each mistake."""

import re
import tomllib
from pathlib import Path

from starcount.errors import Problem
from starcount.survey.group_settings import Bands, trouble_with_group
from starcount.survey.keys import FLAG, TABLES, TEXT, WHOLE, Place, trouble_with_keys

FORMAT = 1

TOP = {"format": WHOLE, "name": TEXT, "description": TEXT, "invented": FLAG, "group": TABLES}
REQUIRED_TOP = ("format", "name", "invented", "group")


def read_settings(path: Path, bands: Bands) -> tuple[dict, list[Problem]]:
    """The settings as far as they are usable, and what is wrong with them."""
    try:
        text = path.read_text(encoding="utf-8")
        settings = tomllib.loads(text)
    except OSError as error:
        return {}, [Problem(str(path), "", error.strerror or str(error), "a survey.toml or the folder that holds it")]
    except UnicodeDecodeError as error:
        return {}, [Problem(str(path), "", f"byte {error.start} is not UTF-8", "a text file in UTF-8")]
    except tomllib.TOMLDecodeError as error:
        return {}, [_not_toml(path, text, str(error))]
    place = Place(str(path), text)
    problems = trouble_with_keys(settings, TOP, REQUIRED_TOP, place)
    if settings.get("format", FORMAT) != FORMAT:
        problems.append(place.problem("format", repr(settings["format"]), f"{FORMAT}, the one format of this version"))
    groups = settings.get("group")
    groups = groups if isinstance(groups, list) else []
    for i, group in enumerate(groups):
        problems += trouble_with_group(group, Place(str(path), text, i), bands)
    problems += _repeated(groups, path, text)
    return settings, problems


def _not_toml(path: Path, text: str, message: str) -> Problem:
    line = re.search(r"line (\d+)", message)
    number = line[1] if line else len(text.rstrip("\n").split("\n"))
    message = re.sub(r" \(at .*\)$", "", message)
    return Problem(str(path), f"line {number}", message, "TOML, whole")


def _repeated(groups: list, path: Path, text: str) -> list[Problem]:
    names = [group.get("name") if isinstance(group, dict) else None for group in groups]
    return [
        Place(str(path), text, i).problem("name", f"{name!r} again", "a name of its own for every group")
        for i, name in enumerate(names)
        if name is not None and name in names[:i]
    ]
