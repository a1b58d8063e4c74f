"""Bringing your own population: which kinds of files there are, and reading them.

A population is a TOML file (see ``own_file``) whose ``kind`` is a key of ``KINDS``, or an ECSV table of luminosity
functions alone. To add a kind: a function from ``OwnFile`` to ``Own``, and a line in ``KINDS``.
"""

import hashlib
from functools import lru_cache
from pathlib import Path

from starcount.errors import Problem, Problems
from starcount.stars.own import Own
from starcount.stars.own_colours import own_colour_table
from starcount.stars.own_file import open_own, settings_of
from starcount.stars.own_functions import bare_function, own_function
from starcount.stars.own_isochrones import own_isochrones

KINDS = {"function": own_function, "colour table": own_colour_table, "isochrones": own_isochrones}
"""What a population file may hold, and what reads it."""


def read_own(path: str | Path) -> Own:
    """Return the population in a TOML file or an ECSV table; raises ``Problems`` with everything wrong with it.

    Read once for as long as its files keep their bytes.
    """
    path = Path(path)
    return _read(path, _digest(path))


@lru_cache(maxsize=8)
def _read(path: Path, digest: str) -> Own:
    """``digest`` is in the key of the cache only."""
    if path.suffix == ".ecsv":
        return bare_function(path)
    kind = settings_of(path).get("kind")
    if not isinstance(kind, str) or kind not in KINDS:
        found = "missing" if kind is None else repr(kind)
        raise Problems(Problem(str(path), "kind", found, f"one of {', '.join(KINDS)}"))
    return KINDS[kind](open_own(path))


def _digest(path: Path) -> str:
    """The digest of a population file and its table; of nothing for files that are not there."""
    files = [path]
    if path.suffix != ".ecsv" and isinstance(table := settings_of(path).get("table"), str):
        files.append(path.parent / table)
    found = hashlib.sha256()
    for file in files:
        found.update(file.read_bytes() if file.is_file() else b"")
    return found.hexdigest()
