"""What a run says of itself: run.json, and what the results hold, in plain numbers."""

import json
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, replace
from pathlib import Path

import numpy as np

from starcount.errors import InputError
from starcount.files import write_text
from starcount.galaxy import Galaxy, law
from starcount.provenance import provenance
from starcount.steps.folder import RECORD
from starcount.survey import Group, Survey

FORMAT = 1
POSTERIOR = "posterior.nc"
WORST = 5


@dataclass(frozen=True, eq=False)
class Run:
    """A finished step: its folder, the content of its run.json, and the prediction and posterior behind them."""

    folder: Path
    record: dict
    prediction: object | None = None
    posterior: object | None = None


def write(part: Path, final: Path, step: str, options: Mapping, inputs: Sequence[str | Path], result: Mapping) -> dict:
    """Write run.json into the folder that is being made, and return its content."""
    content = {
        "format": FORMAT,
        "run": final.name,
        "folder": final.as_posix(),
        "step": step,
        "options": dict(options),
        "result": dict(result),
        "provenance": provenance(inputs, options.get("seed")),
    }
    write_text(part / RECORD, json.dumps(content, indent=1, allow_nan=False) + "\n")
    return content


def read(folder: Path) -> dict:
    """Return the content of a run's run.json."""
    path = folder / RECORD
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (json.JSONDecodeError, UnicodeDecodeError) as error:
        raise InputError(f"{path}: not the record of a run ({error})") from None
    if not isinstance(content, dict) or content.get("format") != FORMAT:
        raise InputError(f"{path}: not the record of a run; expected format {FORMAT}")
    return content


def meta(content: Mapping) -> dict:
    """What the tables of a run carry: who made them, from what, with which options."""
    return {key: content[key] for key in ("run", "step", "options", "provenance")}


def with_counts(survey: Survey, counts: Mapping[str, np.ndarray]) -> Survey:
    """Return the survey with new counts (field, bin) in the groups named, every bin of them used."""
    groups = [
        replace(group, counts=counts[group.name], used=np.ones(counts[group.name].shape, bool))
        if group.name in counts
        else group
        for group in survey.groups
    ]
    return replace(survey, groups=tuple(groups))


def of_survey(survey: Survey) -> dict:
    """What a survey holds, in numbers."""
    return {
        "survey": survey.name,
        "description": survey.description,
        "invented": survey.invented,
        "groups": [
            {
                "name": group.name,
                "band": group.band,
                "fields": len(group.fields),
                "area_deg2": float(group.fields.area_deg2.sum()),
                "sight_lines": int(group.sight_lines.l_deg.size),
                "bins": group.n_bin,
                "m_lo_mag": float(group.edges_mag[0]),
                "m_hi_mag": float(group.edges_mag[-1]),
                "colour": _colour(group),
                "stars": None if group.counts is None else int(group.counts[group.used].sum()),
            }
            for group in survey.groups
        ],
    }


def _colour(group: Group) -> dict | None:
    """The colour of a group: its bands, bins and limits, None at the end of an open bin; None without a colour."""
    if group.colour is None:
        return None
    edges_mag = group.edges_colour_mag
    return {
        "bands": list(group.colour),
        "bins": edges_mag.size - 1,
        "c_lo_mag": _plain(edges_mag[0]),
        "c_hi_mag": _plain(edges_mag[-1]),
    }


def of_prediction(prediction) -> dict:
    """The totals of a prediction, group by group, and the bins that fit worst.

    Limits of bins that are open, or of a colour that the bin's group does not have, are None.
    """
    groups = {}
    for name, group in prediction.groups.items():
        compared = group.compared
        groups[name] = {
            "expected": float(group.expected.sum()),
            "parts": {part: float(counts.sum()) for part, counts in group.parts.items()},
            "classes": _by_class(group.classes),
            "outside": None if group.outside is None else float(group.outside.max()),
            "counted": int(group.group.counts[compared].sum()) if compared.any() else None,
            "expected_of_counted": float(group.expected[compared].sum()) if compared.any() else None,
        }
    return {
        "source": prediction.source,
        "groups": groups,
        "worst_bins": rows(prediction.worst_bins(WORST)),
        "cautions": prediction.cautions(),
    }


def _by_class(classes: Mapping[tuple[str, str], np.ndarray]) -> dict[str, dict[str, float]]:
    """Stars of each component by class, all fields and bins; empty where no classes were asked for."""
    found: dict[str, dict[str, float]] = {}
    for (component, star_class), counts in classes.items():
        found.setdefault(component, {})[star_class] = float(counts.sum())
    return found


def of_posterior(posterior) -> dict:
    """The verdict of a fit and the summary of its parameters."""
    return {
        "certified": posterior.certified,
        "verdict": posterior.verdict,
        "checks": posterior.checks,
        "warnings": posterior.warnings,
        "parameters": rows(posterior.summary()),
    }


def rows(table) -> list[dict]:
    """A table as a list of rows fit for JSON: plain numbers in the columns' units, None for what is not a number."""
    columns = {name: getattr(table[name], "value", table[name]) for name in table.colnames}
    return [{name: _plain(column[i]) for name, column in columns.items()} for i in range(len(table))]


def _plain(cell):
    if np.ma.is_masked(cell):
        return None
    value = cell.item() if isinstance(cell, np.generic) else cell
    return None if isinstance(value, float) and not np.isfinite(value) else value


def of_law(name: str) -> dict:
    """A density law with its source and parameters."""
    found = law(name)
    return {
        "name": found.name,
        "meaning": found.meaning,
        "reference": found.reference,
        "parameters": [{**asdict(p), "choices": [choice for choice, _ in p.choices]} for p in found.parameters],
    }


def of_galaxy(name: str, galaxy: Galaxy) -> dict:
    """A published Galaxy with the value, error and source of every parameter."""
    return {
        "name": name,
        "description": galaxy.description,
        "R0_kpc": galaxy.R0_kpc,
        "components": [
            {"name": c.name, "meaning": c.meaning, "law": c.law.name, "population": c.population}
            for c in galaxy.components
        ],
        "parameters": [asdict(parameter) for parameter in galaxy.parameters.values()],
    }
