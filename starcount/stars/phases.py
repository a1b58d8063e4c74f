"""Classes of stars along isochrones: by the phase a table gives, or by temperature and gravity."""

import numpy as np

from starcount.constants import STAR_CLASSES
from starcount.stars.ecsv import SHOWN_ROWS
from starcount.stars.own_file import OwnFile

PHASE_WORDS = (*STAR_CLASSES, "evolved", "core helium", "left out")
"""What the setting ``phases`` may map phases to: a class; "evolved", a subgiant or red giant by its gravity; "core
helium", clump or horizontal branch by its metallicity; or "left out"."""

LEFT_OUT = -1

GIANT_LOG_G = 3.5
"""Subgiants have a higher gravity, red giants a lower one."""

CLUMP_FEH = -1.0
"""Stars that burn helium in their core are clump stars above this metallicity, on the horizontal branch below it."""

_WHITE_DWARF_LOG_G = 6.0
_TURNED_OFF = 0.98
"""The main sequence has ended where the temperature first falls to this part of its highest value so far."""


def classes_by_phase(own: OwnFile, phase: np.ndarray, feh: np.ndarray, log_g: np.ndarray | None) -> np.ndarray:
    """Return the class (row,) by the setting ``phases``, {word of ``PHASE_WORDS``: [phases]}; -1 is left out."""
    class_index = np.full(phase.size, LEFT_OUT)
    given = own.settings.get("phases")
    if not isinstance(given, dict) or not all(_labels(listed) for listed in given.values()):
        found = "missing" if given is None else repr(given)
        own.wrong("phases", found, "a table of lists, such as dwarf = [0], evolved = [2], for the column phase")
        return class_index
    known = np.zeros(phase.size, bool)
    for word, listed in given.items():
        if word not in PHASE_WORDS:
            own.wrong(f"phases.{word}", "unknown", f"one of {', '.join(PHASE_WORDS)}")
            continue
        rows = np.isin(phase, listed)
        known |= rows
        class_index[rows] = _class_of(own, word, feh[rows], None if log_g is None else log_g[rows])
    missing = [f"{name:g}" if isinstance(name, float) else str(name) for name in np.unique(phase[~known])]
    if missing:
        more = f" and {len(missing) - SHOWN_ROWS} others" if len(missing) > SHOWN_ROWS else ""
        found = f"phase {', '.join(missing[:SHOWN_ROWS])}{more} is in none of them"
        own.wrong("phases", found, "every phase of the table, under 'left out' if need be")
    elif not (class_index != LEFT_OUT).any():
        own.wrong("phases", "every row is left out", "some rows of a class")
    return class_index


def _labels(given: object) -> bool:
    return isinstance(given, list) and all(isinstance(label, int | float | str) for label in given)


def _class_of(own: OwnFile, word: str, feh: np.ndarray, log_g: np.ndarray | None) -> np.ndarray | int:
    if word == "left out":
        return LEFT_OUT
    if word == "core helium":
        return _either(feh > CLUMP_FEH, "clump", "horizontal branch")
    if word != "evolved":
        return STAR_CLASSES.index(word)
    if log_g is None:
        own.wrong("phases.evolved", "no column log_g", "log_g, to tell subgiants from red giants")
        return LEFT_OUT
    return _either(log_g >= GIANT_LOG_G, "subgiant", "red giant")


def classes_by_shape(
    mass_sun: np.ndarray, age_Gyr: np.ndarray, feh: np.ndarray, Teff_K: np.ndarray, log_g: np.ndarray
) -> np.ndarray:
    """Return the class (row,) of isochrones without phases: dwarfs up to the turn-off, then by gravity.

    Clump and horizontal-branch stars cannot be told from red giants and stand among them.
    """
    order = np.lexsort((mass_sun, age_Gyr, feh))
    new = np.flatnonzero((np.diff(age_Gyr[order]) != 0) | (np.diff(feh[order]) != 0)) + 1
    class_index = _either(log_g >= GIANT_LOG_G, "subgiant", "red giant")
    class_index[log_g >= _WHITE_DWARF_LOG_G] = STAR_CLASSES.index("white dwarf")
    for line in np.split(order, new):
        class_index[line[: _turn_off(Teff_K[line])]] = STAR_CLASSES.index("dwarf")
    return class_index


def _turn_off(Teff_K: np.ndarray) -> int:
    """Return how many rows lie up to the hottest one before the temperature first falls."""
    highest = np.maximum.accumulate(Teff_K)
    fallen = np.flatnonzero(Teff_K < _TURNED_OFF * highest)
    end = fallen[0] if fallen.size else Teff_K.size
    return int(Teff_K[:end].argmax()) + 1


def _either(first: np.ndarray, word: str, otherwise: str) -> np.ndarray:
    return np.where(first, STAR_CLASSES.index(word), STAR_CLASSES.index(otherwise))
