"""Star lists of any size, counted into the fields and bins of a survey.

To add a format: write its reader (a function from a path to a ``Source``), import it here, add it to READERS.

Positions come in ICRS or Galactic coordinates. FITS and ECSV carry units, and an angle without one is refused unless
the user names the unit; CSV carries none, nor does Parquet unless its columns say so: there angles are in degrees
(radians where the name ends in ``_rad``). Magnitudes are magnitudes. Null, NaN and infinite values are missing, and
reported.
"""

from collections.abc import Callable, Mapping, Sequence
from pathlib import Path

from starcount.catalogue.columns import check_keys, find_layout
from starcount.catalogue.count import Counted, count_sources
from starcount.catalogue.csv import read_csv
from starcount.catalogue.cuts import parse_cut
from starcount.catalogue.ecsv import read_ecsv, starts_as_ecsv
from starcount.catalogue.fits import read_fits
from starcount.catalogue.parquet import read_parquet
from starcount.catalogue.source import Source
from starcount.errors import InputError, UnknownName

__all__ = ["READERS", "Counted", "count_catalogue", "open_catalogue"]

READERS = {
    ".parquet": read_parquet,
    ".fits": read_fits,
    ".fit": read_fits,
    ".csv": read_csv,
    ".ecsv": read_ecsv,
}
"""Reader by suffix; a further .gz is allowed but for Parquet, which compresses itself."""


def count_catalogue(
    paths: str | Path | Sequence[str | Path],
    survey,
    *,
    columns: Mapping[str, str] | None = None,
    cuts: Sequence[str] = (),
    group: str | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Counted:
    """Return how many stars of one or more files each field and bin of a survey holds.

    paths: files, or folders of Parquet files. columns: {key: column} with the keys ``l``, ``b`` or ``ra``, ``dec``,
    ``mag``, ``colour`` or ``blue``, ``red``, and ``unit`` of the angles; what is not named is looked for. cuts:
    comparisons such as "ruwe < 1.4", all of which a star must pass. group: count into this group of the survey only.
    progress is called with (bytes read, bytes in all). Bins are closed at the bright (blue) edge and open at the faint
    (red) one; a star on a circle's rim is inside. Raises InputError naming file, column, row or line. Memory: a few
    batches, and one set of counts per thread.
    """
    groups = [g for g in survey.groups if group in (None, g.name)]
    if not groups:
        raise UnknownName("group in the survey", group, tuple(g.name for g in survey.groups))
    bands, colours = [g.band for g in groups], [g.colour for g in groups]
    check_keys(columns or {}, bands, colours)
    parsed = [parse_cut(cut) for cut in cuts]
    listed = [paths] if isinstance(paths, (str, Path)) else paths
    sources = [source for path in listed for source in open_catalogue(path)]
    layouts = [find_layout(source, columns or {}, bands, colours, parsed) for source in sources]
    return count_sources(list(zip(sources, layouts, strict=True)), groups, parsed, progress)


def open_catalogue(path: str | Path) -> list[Source]:
    """Return the star lists at a path, opened and checked: one for a file, one per Parquet file of a folder."""
    path = Path(path)
    if path.is_dir():
        files = sorted(path.rglob("*.parquet"))
        if not files:
            raise InputError(f"{path}: folder without files *.parquet; expected a file or a folder of Parquet files")
        return [read_parquet(file) for file in files]
    if not path.is_file():
        raise InputError(f"{path}: no such file")
    return [reader(path)(path)]


def reader(path: Path) -> Callable[[Path], Source]:
    """Return the reader of a file by its suffix; a .csv that starts as ECSV does is read as ECSV."""
    suffixes = [suffix.lower() for suffix in path.suffixes]
    packed = suffixes[-1:] == [".gz"]
    suffix = "".join(suffixes[-2:-1] if packed else suffixes[-1:])
    known = READERS.get(suffix)
    if known is None or (packed and known is read_parquet):
        raise InputError(f"{path}: no star-list format called {path.suffix!r}; known: {', '.join(READERS)}")
    if known is read_csv and starts_as_ecsv(path):
        return read_ecsv
    return known
