"""The density laws. To add one: write its file, import it here, add it to LAWS."""

from starcount.errors import UnknownName
from starcount.galaxy.bar import BAR
from starcount.galaxy.disc import DISC
from starcount.galaxy.halo import HALO
from starcount.galaxy.law import Law
from starcount.galaxy.uniform import UNIFORM

LAWS = {law.name: law for law in (DISC, HALO, BAR, UNIFORM)}


def law(name: str) -> Law:
    """Return a density law by its name."""
    try:
        return LAWS[name]
    except KeyError:
        raise UnknownName("density law", name, tuple(LAWS)) from None
