"""``starcount predict``."""

from pathlib import Path

import click

from starcount.cli import screen


@click.command()
@click.argument("survey", type=Path)
@screen.galaxy_option
@click.option("--classes", is_flag=True, help="Split the components by star class too: more columns, slower.")
@screen.run_option("prediction")
@screen.json_option
def predict(survey: Path, galaxy: str | None, run: str | None, classes: bool, as_json: bool) -> None:
    """Predict how many stars of which component each field and bin holds.

    Nothing is fitted. Where the survey has counts, the prediction is compared with them.
    """
    from starcount import steps

    with screen.progress() as progress:
        done = steps.predict(survey, galaxy=galaxy, run=run, classes=classes, progress=progress)
    screen.show(done.record, screen.run_lines(done.record), as_json)
