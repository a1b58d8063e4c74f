"""``starcount laws``."""

import click

from starcount.cli import screen


@click.command()
@screen.json_option
def laws(as_json: bool) -> None:
    """List the density laws, their parameters, and the published Galaxies."""
    from starcount import steps

    record = steps.laws()
    screen.show(record, _lines(record), as_json)


def _lines(record: dict) -> list[str]:
    lines = []
    for law in record["laws"]:
        lines += [law["name"], f"  {law['meaning']}", f"  source: {law['reference']}"]
        lines += [f"  {row}" for row in screen.columns([_parameter(p) for p in law["parameters"]])]
        lines.append("")
    for galaxy in record["galaxies"]:
        lines += [f"Galaxy {galaxy['name']}", f"  {galaxy['description']}"]
        lines += [f"  {row}" for row in screen.columns([_value(p) for p in galaxy["parameters"]])]
        lines.append("")
    return lines[:-1]


def _parameter(p: dict) -> list[str]:
    return [p["name"], p["unit"], f"{p['lower']:g} to {p['upper']:g}", p["meaning"]]


def _value(p: dict) -> list[str]:
    error = f" +- {p['error']:g}" if p["error"] else ""
    return [p["name"], f"{p['value']:g}{error}", p["unit"], p["reference"]]
