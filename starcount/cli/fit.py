"""``starcount fit``."""

from pathlib import Path

import click

from starcount.cli import screen


@click.command()
@click.argument("survey", type=Path)
@screen.galaxy_option
@click.option(
    "--free",
    "free",
    multiple=True,
    metavar="PARAMETER",
    help="A parameter to fit; repeat it, or separate with commas.  [default: all that have an error in the Galaxy]",
)
@click.option(
    "--likelihood",
    type=click.Choice(["negative-binomial", "poisson"]),
    default="negative-binomial",
    show_default=True,
    help="Counts with a fitted fractional scatter beyond Poisson's, or Poisson's alone.",
)
@click.option("--no-curve", is_flag=True, help="Trust the luminosity functions: no smooth curve is fitted to them.")
@click.option("--no-census", is_flag=True, help="Leave the counts of nearby stars out of the data.")
@click.option("--seed", type=click.IntRange(0, 2**32 - 1), default=1, show_default=True, help="Of everything random.")
@click.option("--draws", type=click.IntRange(min=50), default=1000, show_default=True, help="Draws kept per chain.")
@click.option("--chains", type=click.IntRange(min=2), default=4, show_default=True, help="Chains to compare.")
@click.option("--accept-failed", is_flag=True, help="Exit with 0 although checks failed. The page still says so.")
@screen.run_option("fit")
@screen.json_option
def fit(survey: Path, as_json: bool, no_curve: bool, no_census: bool, free: tuple[str, ...], **options) -> None:
    """Fit the Galaxy's structure to the counts of a survey.

    All groups of fields are fitted together. A fit whose checks fail is written too, marked FAILED CHECKS, and ends
    with exit status 6.
    """
    from starcount import steps

    names = [name.strip() for part in free for name in part.split(",") if name.strip()]
    if free and not names:
        raise click.BadParameter("no parameter named", param_hint="--free")
    with screen.progress() as progress:
        done = steps.fit(
            survey, free=names or None, curve=not no_curve, census=not no_census, progress=progress, **options
        )
    screen.show(done.record, screen.run_lines(done.record), as_json)
