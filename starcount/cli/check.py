"""``starcount check``."""

from pathlib import Path

import click

from starcount.cli import screen


@click.command()
@click.argument("survey", type=Path)
@screen.json_option
def check(survey: Path, as_json: bool) -> None:
    """Say everything that is wrong with a survey's files, at once.

    SURVEY is a folder with a survey.toml, or that file. Nothing is written.
    """
    from starcount import steps

    record = steps.check(survey)
    screen.show(record, _lines(record), as_json)


_MOST_PAIRS = 10


def _lines(record: dict) -> list[str]:
    invented = " (invented)" if record["invented"] else ""
    pairs = [
        f"note: {first} and {second} overlap in the same bins; a fit refuses them"
        for first, second in record["overlapping"]
    ]
    return [f"{record['survey']}{invented}: in order", *screen.group_table(record["groups"]), *pairs[:_MOST_PAIRS]]
