"""ECSV files: the header gives each column's type and unit, the body is read as CSV is."""

from pathlib import Path

from astropy.table.meta import YamlParseError, get_header_from_yaml

from starcount.catalogue.csv import TextSource, head, split_names
from starcount.catalogue.source import Column, Source
from starcount.errors import InputError

FIRST_LINE = "# %ECSV"

KINDS = {"bool": "boolean", "string": "text"}
"""Kinds of the ECSV types that are not numbers."""


def read_ecsv(path: Path) -> Source:
    """Open an ECSV file: names, types and units from its header."""
    comments, line = head(path)
    if not starts_as_ecsv(path):
        raise InputError(f"{path}: starts without {FIRST_LINE!r}; expected an ECSV header (or the suffix .csv)")
    try:
        header = get_header_from_yaml(text[2:].rstrip("\r\n") for text in comments[1:])
        described = [(entry["name"], entry["datatype"], entry.get("unit")) for entry in header["datatype"]]
    except (YamlParseError, KeyError, TypeError) as fault:
        raise InputError(f"{path}: its ECSV header cannot be read ({str(fault).splitlines()[0]})") from None
    delimiter = header.get("delimiter", " ")
    names = split_names(path, line, delimiter)
    if names != [name for name, _, _ in described]:
        raise InputError(f"{path}: column names {names} differ from those of its ECSV header")
    columns = {
        name: Column(name, None if unit is None else str(unit), KINDS.get(kind, "number"))
        for name, kind, unit in described
    }
    return TextSource(path, columns, True, len(comments), delimiter)


def starts_as_ecsv(path: Path) -> bool:
    """Tell whether a text file has an ECSV header: archives also deliver ECSV under the suffix .csv."""
    comments, _ = head(path)
    return bool(comments) and comments[0].startswith(FIRST_LINE)
