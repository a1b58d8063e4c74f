"""``starcount count``."""

from pathlib import Path

import click

from starcount.cli import screen


@click.command()
@click.argument("survey", type=Path)
@click.argument("catalogues", nargs=-1, required=True, type=Path, metavar="CATALOGUE...")
@click.option(
    "--column",
    "columns",
    multiple=True,
    metavar="KEY=COLUMN",
    help="Which column is l and b, or ra and dec, and mag, and colour or else blue and red, e.g. ra=RAJ2000; unit=rad "
    "where angles are not in degrees and the file does not say so. "
    "Without it columns are found by name and unit.",
)
@click.option("--cut", "cuts", multiple=True, metavar="COMPARISON", help='Keep rows where it holds, e.g. "ruwe < 1.4".')
@click.option("--group", metavar="NAME", help="Count into this group of fields only.  [default: all]")
@click.option("--out", type=Path, help="Folder of the survey with its counts.  [default: outputs/SURVEY-counts]")
@screen.json_option
def count(survey: Path, catalogues: tuple[Path, ...], columns, as_json: bool, **options) -> None:
    """Count star catalogues into a survey's fields and bins.

    CATALOGUE is a Parquet (also a folder of parts), FITS, CSV or ECSV file. It is streamed: memory does not grow with
    it. Rows that are dropped are counted and named by reason. The survey is written again, with the counts in it.
    """
    from starcount import steps

    with screen.progress() as progress:
        done = steps.count(survey, catalogues, columns=screen.assignments(columns), progress=progress, **options)
    screen.show(done.record, _lines(done.record), as_json)


def _lines(record: dict) -> list[str]:
    found = record["result"]
    rows = [["rows read", str(found["rows"])], ["counted", str(found["counted"])]]
    rows += [[reason, str(n)] for reason, n in found["dropped"].items()]
    used = ", ".join(f"{key}={column}" for key, column in found["columns"].items())
    empty = [] if found["counted"] else ["warning: not one star was counted; check positions, units and magnitudes"]
    return [
        *screen.columns(rows),
        *empty,
        "",
        *screen.group_table(found["groups"]),
        "",
        f"columns used: {used}",
        f"written: {record['folder']}",
        f"next: starcount fit {record['folder']}",
    ]
