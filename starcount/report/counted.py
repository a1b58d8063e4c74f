"""What was counted, in words: bands and magnitude systems, bins, areas, dust and completeness, group by group."""

from collections.abc import Mapping

import numpy as np
from astropy.table import QTable

from starcount.dust import DUST
from starcount.predict import Prediction
from starcount.stars import BANDS
from starcount.survey import ColourError, Completeness, Group, PhotometricError


def counted_rows(prediction: Prediction) -> list[tuple[str, dict[str, str]]]:
    """Each group's name with what was counted in it, by the words that stand beside it."""
    return [(name, _counted(group.group, group.compared)) for name, group in prediction.groups.items()]


def _counted(group: Group, compared: np.ndarray) -> dict[str, str]:
    fields, seen = group.fields, group.observation
    return {
        "band": _band(group.band),
        "bins": _bins(group.edges_mag, "bright", "faint"),
        **(_colour(group) if group.colour else {}),
        "fields": f"{len(fields.name)} with {np.sum(fields.area_deg2):.6g} deg² in all",
        "stars counted": _stars(group, compared),
        "dust": _dust(fields),
        "completeness": _completeness(seen.completeness),
        "photometric error": _error(seen.error),
        **(
            {"resolution": f"pairs wider than {group.resolution_arcsec:g} arcsec are two stars"}
            if group.resolution_arcsec
            else {}
        ),
        "extra rows": ", ".join(group.extra) or "none",
    }


def _band(name: str) -> str:
    band = BANDS[name]
    return f"{band.description} ({band.system} system, {band.magnitudes} magnitudes; {band.source})"


def _colour(group: Group) -> dict[str, str]:
    """What a group with a colour has more than others."""
    blue, red = group.colour
    error, bias = group.observation.colour_error, group.observation.faint_BP
    return {
        "colour": f"{blue} − {red}: {_band(blue)}; {_band(red)}",
        "bins in colour": _bins(group.edges_colour_mag, "blue", "red"),
        "error of the colour": "none" if error is None else _error(error),
        **({"BP of faint stars": "biased by transits that are left out, as modelled"} if bias else {}),
    }


def _bins(edges_mag: np.ndarray, low: str, high: str) -> str:
    finite = edges_mag[np.isfinite(edges_mag)]
    open_ends = (np.isneginf(edges_mag[0]), "all bluer ones"), (np.isposinf(edges_mag[-1]), "all redder ones")
    ends = [words for is_open, words in open_ends if is_open]
    beyond = f"; open bins hold {' and '.join(ends)}" if ends else ""
    return f"{_closed(finite)}{beyond}; closed at the {low} and open at the {high} edge"


def _closed(edges_mag: np.ndarray) -> str:
    widths = np.diff(edges_mag)
    if widths.size == 0:
        return f"none closed, parted at {', '.join(f'{edge:.4g}' for edge in edges_mag)} mag"
    if np.allclose(widths, widths[0]):
        how = f"{widths.size} of {widths[0]:.4g} mag"
    else:
        how = f"{widths.size}, {widths.min():.4g} to {widths.max():.4g} mag wide"
    return f"{how} from {edges_mag[0]:.4g} to {edges_mag[-1]:.4g} mag"


def _stars(group: Group, compared: np.ndarray) -> str:
    if group.counts is None:
        return "none: a prediction only"
    left_out = int((~compared).sum())
    tail = f"; {left_out} bins not used" if left_out else ""
    return f"{int(group.counts[compared].sum())} in {int(compared.sum())} bins{tail}"


def _dust(fields) -> str:
    names, numbers = np.unique(fields.dust, return_counts=True)
    return "; ".join(f"{DUST[name].description} ({n} fields)" for name, n in zip(names, numbers, strict=True))


def _completeness(curve: Completeness | None) -> str:
    if curve is None:
        return "every star counted"
    m_mag, share = curve.m_mag, curve.share
    how = "a curve" if curve.c_mag is None else "a table in magnitude and colour"
    return f"{how} from {m_mag[0]:.4g} to {m_mag[-1]:.4g} mag, {share.min():.3g} to {share.max():.3g}"


def _error(error: PhotometricError | ColourError | None) -> str:
    if error is None:
        return "none"
    scatter_mag, largest_mag = error.scatter_mag, np.abs(error.offset_mag).max()
    return f"scatter {scatter_mag.min():.3g} to {scatter_mag.max():.3g} mag, offset up to {largest_mag:.3g} mag"


def component_table(prediction: Prediction) -> QTable:
    """Stars expected of each component in each group, all fields and bins, and their share in percent."""
    rows = [_component_row(name, part, counts, group.expected.sum()) for name, group in prediction.groups.items()
            for part, counts in group.parts.items()]  # fmt: skip
    return QTable(rows=rows, names=("group", "component", "expected", "share_percent"))


def _component_row(group: str, part: str, counts: np.ndarray, total: float) -> tuple:
    return group, part, float(counts.sum()), 100 * float(counts.sum() / total)


LOW_LATITUDE_DEG = 20.0
"""Below this latitude patchy dust moves counts by more than ten per cent."""

ALWAYS = (
    "The model is smooth: star clusters, streams, satellite galaxies, spiral arms and the warp are not in it. A field "
    "that holds one of them is no failure of the structure.",
    "Published parameter sets differ from one another by more than their stated errors; heights and densities of the "
    "discs trade against each other. Compare surface densities and effective heights before single parameters.",
    "Counts constrain the product of density and luminosity function only. An error of the one looks like an error of "
    "the other.",
    "Unresolved binaries count as one star; how many are resolved depends on the survey and its resolution.",
)
SMOOTH_DUST = "The dust is smooth and knows no single cloud; fields at low latitude depend on it most."
FITTED = "The intervals are those of this model and these priors; what the model leaves out is not in them."


def cautions(prediction: Prediction, fitted: bool) -> tuple[str, ...]:
    """What the reader should keep in mind about any such page."""
    fields = [group.group.fields for group in prediction.groups.values()]
    low = any((np.abs(field.b_deg[field.dust == "D0"]) < LOW_LATITUDE_DEG).any() for field in fields)
    return (*prediction.cautions(), *ALWAYS, *([SMOOTH_DUST] if low else []), *([FITTED] if fitted else []))


def flattened(provenance: Mapping, prefix: str = "") -> list[tuple[str, str]]:
    """A nested record as rows of (name, value), lists numbered from 1."""
    rows = []
    for key, value in provenance.items():
        name = f"{prefix}{key}"
        if isinstance(value, (list, tuple)):
            value = {str(i + 1): item for i, item in enumerate(value)}
        if isinstance(value, Mapping):
            rows += flattened(value, f"{name} ")
        else:
            rows.append((name, str(value)))
    return rows
