"""Where the numbers of a population come from."""

from importlib.resources import files
from pathlib import Path

from starcount.stars.bands import BANDS
from starcount.stars.ecsv import read_ecsv
from starcount.stars.own_tables import read_own
from starcount.stars.populations import POPULATIONS

_LOCI = ("dwarfs", "evolved", "white_dwarfs")


def sources(name_or_path: str | Path, reference: str, bands: tuple[str, ...]) -> tuple[str, ...]:
    """Return the sources of a population's function, of its locus, and of the definitions of ``bands``, each once."""
    if name_or_path == "census":
        found = [*_of_table(f"census_{reference}.ecsv"), *_of_table("evolved_split.ecsv"), *_of_loci()]
    elif name_or_path in POPULATIONS:
        found = [*_of_table(POPULATIONS[name_or_path]), *_of_loci()]
    else:
        own = read_own(name_or_path)
        found = [*(own.sources or (f"{own.file}, which names no sources",)), *(_of_loci() if own.our_colours else ())]
    found += [f"{name}: {BANDS[name].source}, {BANDS[name].magnitudes} magnitudes" for name in bands]
    return tuple(dict.fromkeys(found))


def _of_loci() -> list[str]:
    return [source for name in _LOCI for source in _of_table(f"{name}.ecsv")]


def _of_table(name: str) -> list[str]:
    return [str(source) for source in read_ecsv(files(__package__) / "data" / name).meta.get("sources", [])]
