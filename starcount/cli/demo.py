"""``starcount demo``."""

import click

from starcount.cli import screen


@click.command()
@click.option("--quick", is_flag=True, help="Predict from the truth and report, without the fit.")
@screen.json_option
def demo(quick: bool, as_json: bool) -> None:
    """Fit and report an invented survey: truth against recovery.

    The survey is written to fields/demo unless it is there, the results to outputs/demo.
    """
    from starcount import steps

    with screen.progress() as progress:
        done = steps.demo(quick=quick, progress=progress)
    screen.show(done.record, screen.run_lines(done.record), as_json)
