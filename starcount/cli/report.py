"""``starcount report``."""

from pathlib import Path

import click

from starcount.cli import screen


@click.command()
@click.argument("run", type=Path)
@screen.json_option
def report(run: Path, as_json: bool) -> None:
    """Draw the figures of a run and the page that puts them together.

    RUN is the name of a run, or its folder. The page is one file that opens without a network.
    """
    from starcount import steps

    with screen.progress() as progress:
        done = steps.report(run, progress=progress)
    screen.show(done.record, screen.run_lines(done.record), as_json)
