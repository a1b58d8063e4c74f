"""``starcount population``."""

from pathlib import Path

import click

from starcount.cli import screen


@click.command()
@click.argument("name", metavar="NAME|PATH")
@click.option("--band", default="G", show_default=True, metavar="BAND", help="The band, such as V, 'SDSS r' or Ks.")
@click.option(
    "--colour",
    nargs=2,
    default=None,
    metavar="BLUE RED",
    help="Two bands, bluer first.  [default: by the band's system]",
)
@screen.galaxy_option
@click.option(
    "--out", type=Path, metavar="FOLDER", help="A new folder to write to.  [default: outputs/population-NAME]"
)
@screen.json_option
def population(
    name: str, band: str, colour: tuple[str, str] | None, galaxy: str | None, out: Path | None, as_json: bool
) -> None:
    """Show a population: luminosity function, colours, classes, sources.

    NAME is one of "thick disc", "halo", "bulge", or "census": what the local census leaves to the thin disc at the Sun,
    in the given Galaxy. PATH is a population of your own, a TOML file or an ECSV table.
    """
    from starcount import steps

    done = steps.population(name, band=band, colour=colour, galaxy=galaxy, out=out)
    screen.show(done.record, _lines(done.record), as_json)


def _lines(record: dict) -> list[str]:
    result, options = record["result"], record["options"]
    unit = "pc3" if result["per"] == "pc3" else result["per"]
    colour = f", colour {' - '.join(result['colour'])}" if result["colour"] else ""
    lines = [f"{options['population']} in {options['band']}{colour}; stars per mag and {unit}", ""]
    names = [row["class"] for row in result["classes"]]
    lines += screen.columns([["M from", "to [mag]", *names], *_rows(result["function"], names)])
    lines += ["", *screen.columns([["class", "stars", "share"], *_shares(result["classes"])]), ""]
    lines += [_component(part, options["galaxy"]) for part in result["components"]]
    outside = ", ".join(f"{band} {share:.1%}" for band, share in result["outside"].items())
    lines.append(f"stars that rest on relations outside their verified range: {outside}")
    if result["no_colour"]:
        lines.append(f"note: no colour: {result['no_colour']}")
    lines += ["sources:", *(f"  {source}" for source in result["sources"])]
    return [*lines, f"written: {record['folder']}"]


def _rows(function: list[dict], names: list[str]) -> list[list[str]]:
    return [[f"{row['M_lo']:g}", f"{row['M_hi']:g}", *(f"{row[name]:.3g}" for name in names)] for row in function]


def _shares(classes: list[dict]) -> list[list[str]]:
    return [[row["class"], f"{row['stars']:.4g}", f"{row['share']:.2%}"] for row in classes]


def _component(part: dict, galaxy: str) -> str:
    where = "pc-3 at the Sun" if part["anchor"] == "sun" else "in all"
    return f"Galaxy {galaxy}: component {part['name']} has {part['amplitude']:.3g} systems with 4.5 < M_V < 8.5 {where}"
