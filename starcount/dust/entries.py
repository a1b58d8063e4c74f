"""The dust entries of fields, laid out one row a sight line."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from starcount.errors import InputError


@dataclass(frozen=True, eq=False)
class Entries:
    """What a dust model is told of each sight line; arrays (line,).

    ``field_b_deg`` is the latitude of the field's centre, ``A_V_mag`` nan and ``profile`` '' where not given.
    """

    field: np.ndarray
    field_name: np.ndarray
    field_b_deg: np.ndarray
    l_deg: np.ndarray
    b_deg: np.ndarray
    A_V_mag: np.ndarray
    profile: np.ndarray
    profiles: Mapping[str, tuple[np.ndarray, np.ndarray]]

    def take(self, chosen: np.ndarray) -> "Entries":
        """Return the entries of some of the lines."""
        columns = (self.field, self.field_name, self.field_b_deg, self.l_deg, self.b_deg, self.A_V_mag, self.profile)
        return Entries(*(column[chosen] for column in columns), self.profiles)

    def refuse(self, wrong: np.ndarray, what: str) -> None:
        """Raise ``InputError`` for the first line that is wrong, naming its field."""
        if wrong.any():
            others = np.unique(self.field[wrong]).size - 1
            more = f" (and {others} more fields)" if others else ""
            raise InputError(f"field {self.field_name[np.argmax(wrong)]}{more}: {what}")


def entries(fields, lines, profiles: Mapping) -> Entries:
    """Repeat each field's dust entry for its sight lines."""
    field = np.repeat(np.arange(len(lines.first) - 1), np.diff(lines.first))
    return Entries(
        field=field,
        field_name=np.asarray(fields.name).astype(str)[field],
        field_b_deg=np.asarray(fields.b_deg)[field],
        l_deg=np.asarray(lines.l_deg),
        b_deg=np.asarray(lines.b_deg),
        A_V_mag=np.asarray(fields.A_V_mag)[field],
        profile=np.asarray(fields.profile).astype(str)[field],
        profiles=profiles,
    )


def require_A_V(entries: Entries, model: str) -> None:
    """Refuse entries without a usable extinction."""
    wrong = ~((entries.A_V_mag >= 0) & np.isfinite(entries.A_V_mag))
    if wrong.any():
        found = entries.A_V_mag[np.argmax(wrong)]
        entries.refuse(wrong, f"dust {model!r} has A_V = {found:g}; expected a finite A_V >= 0 mag")
