"""What was counted, in words: bands and magnitude systems, bins, areas, dust and completeness, group by group."""

from collections.abc import Mapping

import numpy as np
from astropy.table import QTable

from starcount.dust import DUST
from starcount.predict import Prediction
from starcount.stars import BANDS
from starcount.survey import Completeness, Group, PhotometricError


def counted_rows(prediction: Prediction) -> list[tuple[str, dict[str, str]]]:
    """Each group's name with what was counted in it, by the words that stand beside it."""
    return [(name, _counted(group.group, group.compared)) for name, group in prediction.groups.items()]


def _counted(group: Group, compared: np.ndarray) -> dict[str, str]:
    fields = group.fields
    return {
        "band": f"{BANDS[group.band].description} ({BANDS[group.band].system} system; {BANDS[group.band].source})",
        "bins": _bins(group.edges_mag),
        "fields": f"{len(fields.name)} with {np.sum(fields.area_deg2):.6g} deg² in all",
        "stars counted": _stars(group, compared),
        "dust": _dust(fields),
        "completeness": _completeness(group.observation.completeness),
        "photometric error": _error(group.observation.error),
        "extra rows": ", ".join(group.extra) or "none",
    }


def _bins(edges_mag: np.ndarray) -> str:
    widths = np.diff(edges_mag)
    if np.allclose(widths, widths[0]):
        how = f"{widths.size} of {widths[0]:.4g} mag"
    else:
        how = f"{widths.size}, {widths.min():.4g} to {widths.max():.4g} mag wide"
    return f"{how} from {edges_mag[0]:.4g} to {edges_mag[-1]:.4g} mag, closed at the bright and open at the faint edge"


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
    return f"a curve from {m_mag[0]:.4g} to {m_mag[-1]:.4g} mag, {share.min():.3g} to {share.max():.3g}"


def _error(error: PhotometricError | None) -> str:
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
    "Unresolved binaries count as one star; how many are resolved depends on the survey.",
)
SMOOTH_DUST = "The dust is smooth and knows no single cloud; fields at low latitude depend on it most."
FITTED = "The intervals are those of this model and these priors; what the model leaves out is not in them."


def cautions(prediction: Prediction, fitted: bool) -> tuple[str, ...]:
    """What the reader should keep in mind about any such page."""
    fields = [group.group.fields for group in prediction.groups.values()]
    low = any((np.abs(field.b_deg[field.dust == "D0"]) < LOW_LATITUDE_DEG).any() for field in fields)
    return (*ALWAYS, *([SMOOTH_DUST] if low else []), *([FITTED] if fitted else []))


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
